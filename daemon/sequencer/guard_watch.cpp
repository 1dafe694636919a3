#include "daemon/sequencer/guard_watch.h"

#include <algorithm>
#include <cmath>

#include "analysis/base/number.h"
#include "daemon/sequencer/ticks.h"
#include "drivers/instrument/reading.h"

namespace loadstair::sequencer {

std::string_view name_of(GuardDemand demand) {
  switch (demand) {
    case GuardDemand::stop:
      return "stop";
    case GuardDemand::hold:
      return "hold";
    case GuardDemand::next:
      return "next";
  }
  return "stop";
}

std::string_view name_of(GuardWatch::Standing standing) {
  switch (standing) {
    case GuardWatch::Standing::off:
      return "off";
    case GuardWatch::Standing::watching:
      return "watching";
    case GuardWatch::Standing::blanked:
      return "blanked";
    case GuardWatch::Standing::beyond:
      return "beyond";
    case GuardWatch::Standing::missing:
      return "missing";
    case GuardWatch::Standing::tripped:
      return "tripped";
  }
  return "off";
}

namespace {

GuardDemand demand_of(setup::GuardAction action) {
  switch (action) {
    case setup::GuardAction::stop:
      return GuardDemand::stop;
    case setup::GuardAction::hold:
      return GuardDemand::hold;
    case setup::GuardAction::next:
      return GuardDemand::next;
  }
  return GuardDemand::stop;
}

/// nullopt: a missing reading alone is ignored.
std::optional<GuardDemand> demand_of(setup::MissingAction action) {
  switch (action) {
    case setup::MissingAction::ignore:
      return std::nullopt;
    case setup::MissingAction::stop:
      return GuardDemand::stop;
    case setup::MissingAction::hold:
      return GuardDemand::hold;
    case setup::MissingAction::next:
      return GuardDemand::next;
  }
  return GuardDemand::stop;
}

}  // namespace

GuardWatch::GuardWatch(setup::Guard guard, std::string unit, double period_s)
    : guard_{std::move(guard)},
      unit_{std::move(unit)},
      missing_after_ns_{ticks_of(guard_.missing_after_s > 0.0 ? guard_.missing_after_s : 3.0 * period_s)} {}

GuardDemand GuardWatch::demand() const {
  return demand_of(guard_.action);
}

void GuardWatch::arm(std::int64_t now_ns) {
  armed_ = true;
  tripped_ = false;
  beyond_since_ns_.reset();
  seen_ = false;
  overload_ = false;
  last_ns_ = now_ns;
}

void GuardWatch::disarm() {
  armed_ = false;
}

void GuardWatch::blank(std::int64_t now_ns) {
  blank_until_ns_ = now_ns + ticks_of(guard_.blanking_s);
  beyond_since_ns_.reset();
}

void GuardWatch::watch_lower_limit(bool watched) {
  // What was seen under the other rule does not count under this one.
  if (watched != lower_watched_ && guard_.below && last_value_ < *guard_.below) beyond_since_ns_.reset();
  lower_watched_ = watched;
}

std::optional<double> GuardWatch::below() const {
  return lower_watched_ ? guard_.below : std::nullopt;
}

bool GuardWatch::beyond(double value) const {
  const auto lower = below();
  return (guard_.above && value > *guard_.above) || (lower && value < *lower);
}

void GuardWatch::see(const recorder::Point& point) {
  // An old reply or another unit says nothing of the present value, overloaded or not.
  const bool overload =
      guard_.above && (point.flags & instrument::kUnusable) == std::uint32_t{instrument::kOverload};
  if (!overload && ((point.flags & instrument::kUnusable) != 0U || !std::isfinite(point.value))) return;
  seen_ = true;
  overload_ = overload;
  last_ns_ = std::max(last_ns_, point.arrived_ns);
  if (!overload) last_value_ = point.value;
  if (!(overload || beyond(point.value)) || point.t_ns < blank_until_ns_) {
    beyond_since_ns_.reset();
    return;
  }
  if (!beyond_since_ns_) beyond_since_ns_ = point.t_ns;
  beyond_last_ns_ = point.t_ns;
}

bool GuardWatch::missing(std::int64_t now_ns) const {
  return now_ns - last_ns_ > missing_after_ns_;
}

std::string GuardWatch::beyond_text() const {
  if (overload_) {
    return guard_.channel + " is overloaded: beyond the meter's full scale, so above " +
           brief(guard_.above.value_or(0.0)) + " " + unit_;
  }
  const auto text = guard_.channel + " is " + brief(last_value_) + " " + unit_;
  if (guard_.above && last_value_ > *guard_.above) {
    return text + ", above " + brief(*guard_.above) + " " + unit_;
  }
  return text + ", below " + brief(guard_.below.value_or(0.0)) + " " + unit_;
}

std::optional<GuardWatch::Cause> GuardWatch::check(std::int64_t now_ns) {
  if (!armed_ || tripped_) return std::nullopt;
  const auto debounce_ns = ticks_of(guard_.debounce_s);
  if (beyond_since_ns_) {
    const bool long_enough = beyond_last_ns_ - *beyond_since_ns_ >= debounce_ns;
    const bool silent_beyond =
        missing(now_ns) && now_ns - *beyond_since_ns_ >= std::max(debounce_ns, missing_after_ns_);
    if (long_enough || silent_beyond) {
      tripped_ = true;
      std::string text = beyond_text();
      if (debounce_ns > 0) text += " for " + brief(guard_.debounce_s) + " s";
      if (!long_enough) text += ", and silent since";
      return Cause{demand_of(guard_.action), text};
    }
  }
  if (!missing(now_ns)) return std::nullopt;
  const auto demand = demand_of(guard_.missing);
  if (!demand) return std::nullopt;
  tripped_ = true;
  return Cause{*demand, "no usable reading of " + guard_.channel + " for " +
                            base::print_fixed(seconds_of(now_ns - last_ns_), 2) +
                            " s; check the meter, its range and its link"};
}

GuardWatch::Standing GuardWatch::standing(std::int64_t now_ns) const {
  if (!armed_) return Standing::off;
  if (tripped_) return Standing::tripped;
  if (missing(now_ns)) return Standing::missing;
  if (now_ns < blank_until_ns_) return Standing::blanked;
  return beyond_since_ns_ ? Standing::beyond : Standing::watching;
}

std::optional<double> GuardWatch::value(std::int64_t now_ns) const {
  if (!seen_ || overload_ || missing(now_ns)) return std::nullopt;
  return last_value_;
}

std::optional<double> GuardWatch::margin(std::int64_t now_ns) const {
  const auto present = value(now_ns);
  const auto lower = below();
  if (!present || (!guard_.above && !lower)) return std::nullopt;
  double nearest = INFINITY;
  if (guard_.above) nearest = std::min(nearest, *guard_.above - *present);
  if (lower) nearest = std::min(nearest, *present - *lower);
  return nearest;
}

}  // namespace loadstair::sequencer
