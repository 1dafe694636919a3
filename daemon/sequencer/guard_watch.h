// One software guard: when has its limit been passed for long enough, when is its reading missing.
#pragma once

#include <cstdint>
#include <optional>
#include <string>

#include "daemon/recorder/window.h"
#include "daemon/setup/stair.h"

namespace loadstair::sequencer {

/// What a guard asks for.
enum class GuardDemand { stop, hold, next };
[[nodiscard]] std::string_view name_of(GuardDemand demand);

/// Values decide: a reading that cannot be used is a missing one. The one exception is overload: more than
/// the meter's full scale counts as beyond an upper limit, whatever the stair says of missing readings, since
/// a fault drives a quantity there and keeps it there. (Which way a meter is overloaded it does not say:
/// towards a lower limit an overload is a missing reading.) Instants are monotonic.
///
/// A limit trips when readings stand beyond it for the debounce time, counted between the instants of the
/// readings; without debounce the first one trips. Beyond the limit and then silent trips too, after the
/// debounce or the missing time, whichever is longer, even where a missing reading alone is to be ignored.
/// Nothing counts as beyond within the blanking time after a set-point change; a missing reading does.
class GuardWatch {
 public:
  /// period_s  how often the channel's readings come; three of them without a usable one is "missing" where
  /// the
  ///           stair does not say.
  /// unit      of the channel, for messages.
  GuardWatch(setup::Guard guard, std::string unit, double period_s);

  /// Watches from now on, with nothing held against it: after switch-on, after a hold, at a new step.
  void arm(std::int64_t now_ns);
  void disarm();
  /// A set point changes now: blanking begins.
  void blank(std::int64_t now_ns);
  /// Whether `below` counts: not while the output is meant to be dead. Starts as watched.
  void watch_lower_limit(bool watched);
  void see(const recorder::Point& point);

  struct Cause {
    GuardDemand demand = GuardDemand::stop;
    std::string text;  ///< for a person
  };
  /// What it demands, once; nullopt while all is well, and after it has tripped until it is armed again.
  [[nodiscard]] std::optional<Cause> check(std::int64_t now_ns);

  enum class Standing { off, watching, blanked, beyond, missing, tripped };
  [[nodiscard]] Standing standing(std::int64_t now_ns) const;
  /// What it asks for beyond its limit.
  [[nodiscard]] GuardDemand demand() const;
  [[nodiscard]] const setup::Guard& guard() const { return guard_; }
  /// The lower limit as it is watched now; nullopt: none.
  [[nodiscard]] std::optional<double> below() const;
  [[nodiscard]] const std::string& unit() const { return unit_; }
  /// The last usable value; nullopt while it is missing or overloaded.
  [[nodiscard]] std::optional<double> value(std::int64_t now_ns) const;
  /// Distance to the nearest limit, negative beyond it.
  [[nodiscard]] std::optional<double> margin(std::int64_t now_ns) const;

 private:
  [[nodiscard]] bool beyond(double value) const;
  [[nodiscard]] bool missing(std::int64_t now_ns) const;
  [[nodiscard]] std::string beyond_text() const;

  setup::Guard guard_;
  std::string unit_;
  std::int64_t missing_after_ns_;
  bool armed_ = false;
  bool lower_watched_ = true;
  bool tripped_ = false;
  bool seen_ = false;         ///< a usable reading since it was armed
  std::int64_t last_ns_ = 0;  ///< arrival of the last usable reading, or the arming
  double last_value_ = 0.0;
  bool overload_ = false;  ///< the last reading that counted was one, towards the upper limit
  std::int64_t blank_until_ns_ = INT64_MIN;
  std::optional<std::int64_t> beyond_since_ns_;  ///< instant of the first reading beyond, in a row
  std::int64_t beyond_last_ns_ = 0;
};

/// "off", "watching", "blanked", "beyond", "missing", "tripped".
[[nodiscard]] std::string_view name_of(GuardWatch::Standing standing);

}  // namespace loadstair::sequencer
