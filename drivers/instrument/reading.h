// instrument: from a profile and a link to readings with their time: polling, resynchronisation, identity,
// reconnection. Not for storing, converting (a shunt, a thermocouple) or judging readings.
#pragma once

#include <cstdint>
#include <string>
#include <string_view>
#include <vector>

namespace loadstair::instrument {

/// Quality of a reading, as bits. Zero is good. The numbers are part of the record's format: never reuse one.
enum Flag : std::uint32_t {
  kOverload = 1U << 0,      ///< the instrument said so, in its own words or by the special number
  kInvalid = 1U << 1,       ///< no number could be read: garbage, not-a-number, a truncated reply
  kStale = 1U << 2,         ///< the same reply again while a free-running meter should have moved on
  kUnitChanged = 1U << 3,   ///< another unit or function than the profile promises: somebody turned the knob
  kRangeChanged = 1U << 4,  ///< another range than the one before
  kTyped = 1U << 5,         ///< entered by a person (not a fault)
  kImplausible =
      1U << 6,  ///< far from what was expected, and confirmed by the person who typed it (not a fault)
  kSuperseded = 1U << 7,  ///< a typed value that was corrected; kept, not used
  kMissing = 1U << 8,     ///< asked for, and no reply came in time
};
/// Flags that forbid the use of a value.
inline constexpr std::uint32_t kUnusable =
    kOverload | kInvalid | kStale | kUnitChanged | kSuperseded | kMissing;

/// One value from one instrument, as the instrument said it, in the unit that the profile declares for it.
struct Reading {
  std::int32_t value_index = 0;  ///< index into Profile::values
  /// Monotonic instant the value stands for. A reply: the middle between the query's first byte out and the
  /// reply's first byte in, minus the declared delay, half the integration time and, of a free-running meter,
  /// half the update period. An unsolicited line: its first byte, minus delay and half the integration time.
  std::int64_t t_ns = 0;
  /// Half of that span (of a line: half its length), plus half the update period of a free-running meter.
  std::int64_t half_width_ns = 0;
  double value = 0.0;  ///< NaN exactly when there is no number (kInvalid, kMissing, kOverload)
  std::uint32_t flags = 0;
  double range = 0.0;  ///< full scale the reading was taken on; 0: not known
};

/// One query with its reply (or one unsolicited line, with an empty query), and what was read from it.
struct Exchange {
  std::int64_t sent_ns = 0;      ///< monotonic; for an unsolicited line: its first byte
  std::int64_t received_ns = 0;  ///< last byte of the reply
  std::string query;
  std::string reply;  ///< without the terminator; empty when none came
  std::vector<Reading> readings;
};

enum class EventKind {
  connected,
  lost,            ///< link closed, or silent beyond the limit
  identity_wrong,  ///< something else answers: nothing is read from it and nothing is sent to it
  timeout,         ///< one query without a reply in time
  resynchronised,  ///< late bytes thrown away, the line is in step again
  garbage,         ///< a reply that could not be read
  overload,
  unit_changed,
  stale,
  command_sent,     ///< a setting or a safe command
  command_refused,  ///< read back as something else, or not confirmed
};
[[nodiscard]] std::string_view name_of(EventKind kind);

struct Event {
  std::int64_t t_ns = 0;
  EventKind kind = EventKind::lost;
  std::string text;  ///< for a person: what happened, on what, what to do
};

}  // namespace loadstair::instrument
