#include "analysis/estimate/tie.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <string_view>
#include <utility>
#include <vector>

#include "analysis/estimate/coverage.h"
#include "analysis/estimate/sharing.h"

namespace loadstair::estimate {

namespace {

/// A ratio known worse than this is no tie.
constexpr double kMostRelativeU = 0.1;

/// Gains and offsets are what a tie measures: what is left tells how well it did.
Estimate as_measured(const Estimate& a) {
  return a.filtered([](const Source& source) {
    const std::string_view part = meter_part_of(source);
    return part != "gain" && part != "offset";
  });
}

bool finite(const Estimate& a) {
  return std::isfinite(a.value()) && std::isfinite(a.variance());
}

bool within_interval(const Estimate& a) {
  return std::abs(a.value()) <= coverage(a).expanded;
}

}  // namespace

base::Outcome<TieLevel> tie_level(const TieLevel& type_a, const MeterRange& meter_a,
                                  const MeterRange& meter_b, const Occasion& level, const Shares& shares_a,
                                  const Shares& shares_b) {
  const Quoted a = with_meter_error(type_a.a.value(), meter_a, level, shares_a);
  if (!a) return a.refusal();
  const Quoted b = with_meter_error(type_a.b.value(), meter_b, level, shares_b);
  if (!b) return b.refusal();
  return TieLevel{*a + (type_a.a - type_a.a.value()), *b + (type_a.b - type_a.b.value())};
}

base::Outcome<Tie> tie_check(const TieLevel& one, const TieLevel& other) {
  for (const Estimate* reading : {&one.a, &one.b, &other.a, &other.b}) {
    if (!finite(*reading)) return base::Refusal{"tie check", "a reading is not a finite number"};
  }
  const bool in_order = one.b.value() <= other.b.value();
  const TieLevel& low = in_order ? one : other;
  const TieLevel& high = in_order ? other : one;
  const Estimate distance_a = high.a - low.a;
  const Estimate distance_b = high.b - low.b;
  const base::Refusal too_near{"tie check",
                               "its two levels are too near to each other to tell gain from offset"};
  if (!(std::abs(distance_a.value()) > 0) || !(distance_b.value() > 0)) return too_near;
  Tie out;
  out.ratio = distance_b / distance_a;
  out.offset = low.b - out.ratio * low.a;
  if (!finite(out.ratio) || !finite(out.offset)) return too_near;
  out.gain_difference = as_measured(out.ratio - 1);
  out.offset_difference = as_measured(out.offset);
  if (out.gain_difference.standard_uncertainty() > kMostRelativeU * std::abs(out.ratio.value())) {
    return too_near;
  }
  out.low = low.b.value();
  out.high = high.b.value();
  out.within_specifications = within_interval(out.ratio - 1) && within_interval(out.offset);
  return out;
}

Estimate tied(const Estimate& reading_b, const Tie& tie) {
  return (reading_b - tie.offset) / tie.ratio;
}

Quoted zero_corrected(const Estimate& reading, const ZeroCheck& zero, const MeterRange& meter,
                      const Occasion& occasion) {
  if (!finite(reading) || !finite(zero.before) || !finite(zero.after)) {
    return base::Refusal{meter.meter.instrument + " zero", "the reading or a zero is not a finite number"};
  }
  const std::string fixed = key::meter(meter.meter, "offset");
  const std::string in_run = key::meter_in_run(meter.meter, "offset", occasion.run);
  const Estimate kept =
      reading.filtered([&](const Source& source) { return source.key != fixed && source.key != in_run; });
  std::vector<Term> added;
  const auto add = [&](std::string key, const std::string& what, double u, bool resolution) {
    Source source;
    source.key = std::move(key);
    source.name = meter.meter.instrument + " zero: " + what;
    source.distribution = Distribution::rectangular;
    source.owner = meter.meter;
    source.resolution = resolution;
    added.push_back({make_source(std::move(source)), u});
  };
  const double half_change = std::abs(zero.after.value() - zero.before.value()) / 2;
  add(key::meter_in_run(meter.meter, "zero drift", occasion.run), "change over the run",
      half_change / std::numbers::sqrt3, false);
  const double u_digit = meter.digit / std::sqrt(12.0);
  add(key::meter_in_run(meter.meter, "zero resolution", occasion.run), "resolution", u_digit, true);
  if (meter.accuracy && meter.accuracy->digits > 0) {
    add(key::meter_at_level(meter.meter, "resolution", occasion.run, occasion.level),
        "resolution of the reading", u_digit, true);
  }
  return kept - (zero.before + zero.after) / 2 + Estimate{0, std::move(added)};
}

}  // namespace loadstair::estimate
