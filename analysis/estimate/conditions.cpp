#include "analysis/estimate/conditions.h"

#include <algorithm>
#include <cmath>
#include <string_view>

#include "analysis/base/number.h"

namespace loadstair::estimate {

namespace {

std::string shown(double value) {
  // Four digits, without the zeros that they would end on.
  return base::print_number(base::parse_number(base::print_significant(value, 4)).value_or(value));
}

/// Collects what a condition turned out to be.
class Verdicts {
 public:
  explicit Verdicts(ConditionsFound& out) : out_{out} {}

  /// actual is judged only where a limit is declared; where nobody knows it, that is noted once.
  [[nodiscard]] bool known(bool declared, const std::optional<double>& actual, const char* what) {
    if (!declared) return false;
    if (actual && std::isfinite(*actual)) return true;
    out_.not_checked.emplace_back(what);
    return false;
  }

  void broken(std::string text) {
    out_.violated.push_back(std::move(text));
    out_.allowed_for = false;
  }

  void broken_but_allowed_for(std::string text) { out_.violated.push_back(std::move(text)); }

 private:
  ConditionsFound& out_;
};

void judge_temperature(ConditionsFound& out, Verdicts& verdicts, const SpecificationConditions& spec,
                       const std::optional<double>& ambient_c) {
  if (!verdicts.known(spec.reference_low_c || spec.reference_high_c, ambient_c, "ambient temperature"))
    return;
  double outside_k = 0;
  if (spec.reference_low_c) outside_k = std::max(outside_k, *spec.reference_low_c - *ambient_c);
  if (spec.reference_high_c) outside_k = std::max(outside_k, *ambient_c - *spec.reference_high_c);
  if (!(outside_k > 0)) return;
  out.fixed_is_common = false;
  std::string text = "ambient " + shown(*ambient_c) + " °C is " + shown(outside_k) +
                     " K outside the span in which the accuracy holds";
  if (!spec.reading_percent_per_k && !spec.range_percent_per_k) {
    verdicts.broken(text + ", and no temperature coefficient is declared");
    return;
  }
  if (out.meter.accuracy) {
    out.meter.accuracy->percent_of_reading += outside_k * spec.reading_percent_per_k.value_or(0);
    out.meter.accuracy->percent_of_range += outside_k * spec.range_percent_per_k.value_or(0);
  }
  verdicts.broken_but_allowed_for(text + ": the limits are widened by the declared coefficient");
}

void judge_signal(Verdicts& verdicts, const SpecificationConditions& spec, const Conditions& actual) {
  if (verdicts.known(spec.band_low_hz || spec.band_high_hz, actual.frequency_hz, "frequency")) {
    const double hz = *actual.frequency_hz;
    if (spec.band_low_hz && hz < *spec.band_low_hz) {
      verdicts.broken("frequency " + shown(hz) + " Hz is below the band from " + shown(*spec.band_low_hz) +
                      " Hz");
    }
    if (spec.band_high_hz && hz > *spec.band_high_hz) {
      verdicts.broken("frequency " + shown(hz) + " Hz is above the band to " + shown(*spec.band_high_hz) +
                      " Hz");
    }
  }
  if (verdicts.known(spec.crest_factor_limit.has_value(), actual.crest_factor, "crest factor") &&
      *actual.crest_factor > *spec.crest_factor_limit) {
    verdicts.broken("crest factor " + shown(*actual.crest_factor) + " is above the limit of " +
                    shown(*spec.crest_factor_limit));
  }
  if (verdicts.known(spec.least_power_factor.has_value(), actual.power_factor, "power factor") &&
      std::abs(*actual.power_factor) < *spec.least_power_factor) {
    verdicts.broken("power factor " + shown(std::abs(*actual.power_factor)) + " is below " +
                    shown(*spec.least_power_factor) + ", from which on the accuracy holds");
  }
}

}  // namespace

ConditionsFound judge_conditions(double reading, const MeterRange& meter,
                                 const SpecificationConditions& specification, const Conditions& conditions) {
  ConditionsFound out;
  out.meter = meter;
  Verdicts verdicts{out};
  judge_temperature(out, verdicts, specification, conditions.ambient_c);
  if (verdicts.known(specification.most_days.has_value(), conditions.days_since_adjustment,
                     "time since adjustment") &&
      *conditions.days_since_adjustment > *specification.most_days) {
    out.fixed_is_common = false;
    verdicts.broken("adjusted " + shown(*conditions.days_since_adjustment) +
                    " days ago, and the accuracy holds for " + shown(*specification.most_days) + " days");
  }
  if (specification.least_percent_of_range && meter.range > 0 && std::isfinite(reading)) {
    const double percent = 100 * std::abs(reading) / meter.range;
    if (percent < *specification.least_percent_of_range) {
      verdicts.broken("the reading is " + shown(percent) + " % of the range, and the accuracy holds from " +
                      shown(*specification.least_percent_of_range) + " %");
    }
  }
  judge_signal(verdicts, specification, conditions);
  return out;
}

}  // namespace loadstair::estimate
