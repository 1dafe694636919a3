// From what an instrument said, and when, to readings with their quality.
#pragma once

#include <cstdint>
#include <map>
#include <string>
#include <vector>

#include "drivers/dialect/field.h"
#include "drivers/dialect/text_line.h"
#include "drivers/instrument/conversation.h"
#include "drivers/instrument/instrument.h"
#include "drivers/instrument/profile.h"
#include "drivers/instrument/reading.h"
#include "drivers/instrument/stuck.h"

namespace loadstair::instrument {

/// The instant a value stands for, and how well it is known.
struct Instant {
  std::int64_t t_ns = 0;
  std::int64_t half_width_ns = 0;
};

/// Keeps per value what is needed to judge the next one. Overload, another unit, garbage and a stuck display
/// are told of when they begin, not with every reading.
class Interpreter {
 public:
  /// Precondition: `check_profile(profile)` is ok.
  Interpreter(const Profile& profile, const InstrumentSettings& settings, Tell tell);

  /// The middle between the query's first and the reply's first byte, minus delay and half the integration
  /// time.
  [[nodiscard]] Instant instant_of_reply(std::int64_t sent_ns, std::int64_t first_ns) const;
  /// A line's first byte, minus the same.
  [[nodiscard]] Instant instant_of_line(std::int64_t first_ns, std::int64_t last_ns) const;

  struct Reply {
    std::vector<Reading> readings;
    bool readable =
        true;  ///< false: something in it was no reply of this instrument, so the line may be out of step
  };
  [[nodiscard]] Reply read_reply(std::size_t query, const std::string& text, Instant instant);
  /// Readings in place of those of a reply that did not come (kMissing) or had no end (kInvalid).
  [[nodiscard]] std::vector<Reading> absent(std::size_t query, Instant instant, Flag flag) const;

  /// An unsolicited line: a reading of each value whose pattern it has.
  [[nodiscard]] std::vector<Reading> read_line(const std::string& text, Instant instant);
  /// Values of which no line came for `limit_ns`, each told once.
  [[nodiscard]] std::vector<Reading> silent_values(std::int64_t now_ns, std::int64_t limit_ns);
  /// A reading of every value that says it is missing: the link was lost.
  [[nodiscard]] std::vector<Reading> all_missing(std::int64_t now_ns) const;
  /// A connection begins: silence counts from now.
  void begin(std::int64_t now_ns);

 private:
  struct Value {
    std::string unit;
    dialect::Quality quality = dialect::Quality::good;  ///< of the last reading
    bool stuck = false;
    std::map<dialect::NumberShape, double> shapes;  ///< share among the replies of late
    StuckWatch watch;
    std::int64_t seen_ns = 0;
    bool silent = false;
  };

  [[nodiscard]] Reading judge(std::size_t value, const dialect::Field& field, Instant instant);
  [[nodiscard]] bool has_known_shape(Value& value, std::string_view element);
  void tell_change(const ProfileValue& profile, Value& value, const dialect::Field& field);

  const Profile& profile_;
  Tell tell_;
  dialect::NumberRules rules_;
  std::int64_t age_ns_;  ///< delay and half the integration time
  std::int64_t half_update_ns_;
  std::vector<Value> values_;
  std::vector<dialect::LinePattern> patterns_;
  std::vector<std::vector<int>> query_values_;  ///< per query and element: index of the value, or -1
  bool strange_lines_ = false;                  ///< the last line looked like no pattern
};

}  // namespace loadstair::instrument
