#include <algorithm>
#include <cmath>
#include <string>

#include "analysis/base/number.h"
#include "analysis/estimate/distribution_function.h"
#include "analysis/limits/limits.h"

namespace loadstair::limits {

namespace {

/// Probability of a quantity below a limit.
double below(double limit, const estimate::Coverage& result) {
  if (!(result.standard_uncertainty > 0)) return result.value <= limit ? 1 : 0;
  const double distance = (limit - result.value) / result.standard_uncertainty;
  return estimate::student_below(distance, result.degrees_of_freedom);
}

std::optional<std::string> fault_of(const Tolerance& tolerance) {
  if (!tolerance.low && !tolerance.high) return "no limit is given";
  if (!std::isfinite(tolerance.low.value_or(0)) || !std::isfinite(tolerance.high.value_or(0))) {
    return "a limit is not a finite number";
  }
  if (tolerance.low && tolerance.high && *tolerance.low > *tolerance.high) {
    return "the lower limit is above the upper one";
  }
  return std::nullopt;
}

std::optional<std::string> fault_of(const estimate::Coverage& result, const Rule& rule) {
  if (!std::isfinite(result.value) || !std::isfinite(result.low) || !std::isfinite(result.high)) {
    return "the result or its interval is not a finite number";
  }
  if (result.standard_uncertainty > 0 && !(result.degrees_of_freedom > 0)) {
    return "the result's degrees of freedom are not above zero";
  }
  if (!(rule.guard_factor >= 0) || !std::isfinite(rule.guard_factor)) {
    return "the guard factor is not a number from 0 up";
  }
  return std::nullopt;
}

/// How far the stretched interval reaches to either side of the value, unit of the result.
struct Guard {
  double down = 0;
  double up = 0;
};

Guard guard_of(const estimate::Coverage& result, double factor) {
  return {factor * std::max(0.0, result.value - result.low),
          factor * std::max(0.0, result.high - result.value)};
}

Verdict verdict_of(const Decision& decision, const Guard& guard) {
  const Tolerance& tolerance = decision.tolerance;
  const double value = decision.value;
  // With no guard band a value on the limit passes, and whatever is beyond it fails.
  if (tolerance.high && value > *tolerance.high && value - guard.down >= *tolerance.high)
    return Verdict::fail;
  if (tolerance.low && value < *tolerance.low && value + guard.up <= *tolerance.low) return Verdict::fail;
  const bool under = !tolerance.high || value <= *decision.acceptance.high;
  const bool over = !tolerance.low || value >= *decision.acceptance.low;
  return under && over ? Verdict::pass : Verdict::undecided;
}

/// Places after the point that show two digits of the result's interval, at most those of a double.
int places_for(const estimate::Coverage& result) {
  const double half = (result.high - result.low) / 2;
  if (!(half > 0)) return 4;
  return std::clamp(1 - static_cast<int>(std::floor(std::log10(half))), 0, 12);
}

std::string shown(double value, int places, std::string_view unit) {
  std::string out = base::print_fixed(value, places);
  if (!unit.empty()) out += " " + std::string{unit};
  return out;
}

/// A limit to six digits, without the zeros that they would end on.
std::string shown_limit(double limit, std::string_view unit) {
  std::string out = base::print_number(base::parse_number(base::print_significant(limit, 6)).value_or(limit));
  if (!unit.empty()) out += " " + std::string{unit};
  return out;
}

std::string limits_text(const Tolerance& tolerance, std::string_view unit) {
  if (tolerance.low && tolerance.high) {
    return "within " + shown_limit(*tolerance.low, unit) + " to " + shown_limit(*tolerance.high, unit);
  }
  if (tolerance.high) return "at most " + shown_limit(*tolerance.high, unit);
  return "at least " + shown_limit(*tolerance.low, unit);
}

std::string probability_text(double probability) {
  // Rounded towards the middle: 0.9996 is not "100 %".
  if (probability > 0.999) return "above 99.9 %";
  if (probability < 0.001) return "below 0.1 %";
  return base::print_fixed(100 * probability, 1) + " %";
}

std::string text_of(const Decision& decision, const estimate::Coverage& result, std::string_view unit) {
  const int places = places_for(result);
  std::string out{word_of(decision.verdict)};
  out += ": " + shown(result.value, places, unit) + ", 95 % interval " + shown(result.low, places, unit) +
         " to " + shown(result.high, places, unit) + ", allowed " + limits_text(decision.tolerance, unit);
  out += decision.guard_factor > 0
             ? ", guard band " + base::print_number(decision.guard_factor) + " U"
             : ", simple acceptance without a guard band";
  return out + "; probability of conformity " + probability_text(decision.conforming_probability);
}

}  // namespace

std::string_view word_of(Verdict verdict) {
  switch (verdict) {
    case Verdict::pass:
      return "pass";
    case Verdict::fail:
      return "fail";
    case Verdict::undecided:
      return "undecided";
  }
  return "undecided";
}

double conforming_probability(const estimate::Coverage& result, const Tolerance& tolerance,
                              std::span<const double> draws) {
  if (!draws.empty()) {
    const auto inside = std::count_if(draws.begin(), draws.end(), [&](double draw) {
      return !(tolerance.high && draw > *tolerance.high) && !(tolerance.low && draw < *tolerance.low);
    });
    return static_cast<double>(inside) / static_cast<double>(draws.size());
  }
  if (!(result.standard_uncertainty > 0)) {
    const bool inside = !(tolerance.high && result.value > *tolerance.high) &&
                        !(tolerance.low && result.value < *tolerance.low);
    return inside ? 1 : 0;
  }
  const double under = tolerance.high ? below(*tolerance.high, result) : 1;
  const double too_low = tolerance.low ? below(*tolerance.low, result) : 0;
  return std::clamp(under - too_low, 0.0, 1.0);
}

base::Outcome<Decision> decide(const estimate::Coverage& result, const Tolerance& tolerance,
                               std::string_view unit, const Rule& rule, std::span<const double> draws) {
  if (auto fault = fault_of(tolerance)) return base::Refusal{"decision", *fault};
  if (auto fault = fault_of(result, rule)) return base::Refusal{"decision", *fault};
  Decision out;
  out.tolerance = tolerance;
  out.value = result.value;
  out.guard_factor = rule.guard_factor;
  const Guard guard = guard_of(result, rule.guard_factor);
  if (tolerance.low) out.acceptance.low = *tolerance.low + guard.down;
  if (tolerance.high) out.acceptance.high = *tolerance.high - guard.up;
  out.conforming_probability = conforming_probability(result, tolerance, draws);
  out.verdict = verdict_of(out, guard);
  out.text = text_of(out, result, unit);
  return out;
}

base::Outcome<Decision> decide_lower_bound(double at_least, const Tolerance& tolerance,
                                           std::string_view unit) {
  if (auto fault = fault_of(tolerance)) return base::Refusal{"decision", *fault};
  if (!std::isfinite(at_least)) return base::Refusal{"decision", "the bound is not a finite number"};
  Decision out;
  out.tolerance = tolerance;
  out.value = at_least;
  if (tolerance.high && at_least > *tolerance.high) out.verdict = Verdict::fail;
  out.conforming_probability = 0;
  out.text = std::string{word_of(out.verdict)} + ": at least " + shown_limit(at_least, unit) + ", allowed " +
             limits_text(tolerance, unit) + "; only a lower bound is known";
  return out;
}

base::Outcome<Decision> decide(const Limit& limit, const estimate::Coverage& result, const Rule& rule,
                               std::span<const double> draws) {
  auto out = decide(result, {limit.low, limit.high}, limit.unit, rule, draws);
  if (!out) return base::Refusal{"limit of " + limit.quantity, out.refusal().reason};
  out->text = limit.quantity + ": " + out->text;
  return out;
}

}  // namespace loadstair::limits
