// What can be put into a record, as plain values.
#pragma once

#include <cstdint>
#include <memory>
#include <optional>
#include <string>
#include <string_view>
#include <utility>
#include <variant>
#include <vector>

#include "drivers/instrument/reading.h"

namespace loadstair::store {

using RunId = std::int64_t;  ///< from 1; 0: no run

enum class RunState { running, done, stopped, interrupted };
enum class StepState { waiting, soaking, settling, averaging, capturing, done, skipped, stopped };

/// The words that the record, the commands and the page use ("running", "waiting").
[[nodiscard]] std::string_view name_of(RunState state);
[[nodiscard]] std::string_view name_of(StepState state);

// Instants: every `_ns` that is posted is the monotonic clock's. The record keeps UTC nanoseconds, t plus the
// UTC offset of the run's start, so that a clock step within a run moves nothing. For a run that this writer
// did not begin (one that a crash left behind) and for run 0 the writer's own offset counts.

/// A channel of a run. Readings name it by its place in RunStart::channels.
struct ChannelEntry {
  std::string name;
  std::string instrument;  ///< empty: typed
  std::string value;       ///< which of the profile's values
  std::string unit;        ///< of the stored value, before conversion
};

struct StepPlan {
  std::string label;
  double load_w = 0.0;
};

struct NamedText {
  std::string name, text;
};

struct RunStart {
  std::string prototype, revision, unit;
  std::int64_t started_ns = 0;
  std::int64_t utc_offset_ns = 0;
  std::string zone;  ///< as the report prints it: "Europe/Berlin"
  std::uint64_t seed = 0;
  std::string program_version, method_version;
  std::string hookup_file, hookup_text;
  std::string stair_file, stair_text;
  std::vector<NamedText> profiles;
  std::vector<ChannelEntry> channels;
  std::vector<StepPlan> steps;
};

struct RunEnd {
  RunId run = 0;
  RunState state = RunState::done;
  std::int64_t ended_ns = 0;
  std::string reason;
};

/// One step as it stands; posted again whenever something of it changes (the last one counts).
/// Windows that have not begun are nullopt.
struct StepUpdate {
  RunId run = 0;
  std::int32_t step = 0;
  StepState state = StepState::waiting;
  std::optional<std::int64_t> begun_ns, soak_begin_ns, settle_begin_ns, average_begin_ns, average_end_ns,
      ended_ns;
  std::string
      settled_how;  ///< "slope", "rate", "prediction", "not settled", "no criterion"; empty: not yet known
  std::optional<std::int64_t> settled_ns;
  std::string reason;  ///< why it was skipped or stopped
};

/// One reply with what was read from it. `channels[i]` belongs to `exchange.readings[i]`; -1: no channel uses
/// it.
struct ReplyItem {
  RunId run = 0;
  std::string instrument;
  instrument::Exchange exchange;
  std::vector<std::int32_t> channels;
};

/// What a person typed. A later answer for the same step, channel and round supersedes the earlier ones.
struct TypedAnswer {
  RunId run = 0;
  std::int32_t step = 0;
  std::int32_t channel = 0;
  std::int32_t round = 1;  ///< 1, or 2 (asked in reverse order)
  std::int64_t prompted_ns = 0, entered_ns = 0;
  std::string text;    ///< as typed
  double value = 0.0;  ///< in the channel's unit before conversion
  std::string unit;
  double range = 0.0;       ///< full scale; 0: not given
  double last_digit = 0.0;  ///< weight of the last digit; 0: not given
  std::uint32_t flags = instrument::kTyped;
};

/// A file that a scope left, whole. Stored compressed, in chunks of at most 1 MB between batches.
struct CaptureItem {
  RunId run = 0;
  std::int32_t step = 0;
  std::string file_name;
  std::string instrument;
  std::int64_t t_ns = 0;
  std::shared_ptr<const std::string> bytes;
};

struct EventItem {
  RunId run = 0;
  std::int64_t t_ns = 0;
  std::string kind;  ///< instrument::name_of(EventKind), or a word of the sequencer's: "guard", "clock step"
  std::string source;  ///< instrument, guard or part of the program
  std::string text;
  std::optional<std::int64_t> utc_offset_before_ns, utc_offset_after_ns;  ///< a clock step
};

struct SettingItem {
  RunId run = 0;
  std::int32_t step = 0;  ///< -1: at start or end
  std::string control, setting;
  double value = 0.0;
  std::optional<double> read_back;
  std::int64_t t_ns = 0;
};

struct PromptItem {
  RunId run = 0;
  std::int32_t step = 0;
  std::string text, answer, by;  ///< by: "terminal", "page", "rehearsal"
  std::int64_t prompted_ns = 0, answered_ns = 0;
};

/// A correction of a run's texts, applied at evaluation: "/channels/2/conversion/shunt/resistance_ohm". Also
/// for a sealed run, and never changed afterwards.
struct AmendmentItem {
  RunId run = 0;
  std::string who, why;
  std::int64_t when_utc_ns = 0;
  std::string document;  ///< "hookup" or "stair"
  std::string path, old_value, new_value;
};

/// A check of the bench itself: zero, tie, closure.
struct BenchCheckItem {
  RunId run = 0;
  std::string kind;
  std::int64_t begun_ns = 0, ended_ns = 0;
  std::string text;
};

/// Seals the run: nothing of it can be changed any more, and its digest joins the chain.
struct SealItem {
  RunId run = 0;
  std::int64_t when_utc_ns = 0;
};

/// The bench is in its safe state: the run owes none any more. Every run owes one from its beginning; this
/// may come long after its end, for a sealed run too.
struct SafeStateItem {
  RunId run = 0;
};

struct RunBegin {
  RunId run = 0;
  RunStart start;
};

using Item = std::variant<RunBegin, RunEnd, StepUpdate, ReplyItem, TypedAnswer, CaptureItem, EventItem,
                          SettingItem, PromptItem, AmendmentItem, BenchCheckItem, SealItem, SafeStateItem>;

}  // namespace loadstair::store
