#include "analysis/settling/thermal_end.h"

#include <algorithm>
#include <cmath>
#include <string>
#include <vector>

#include "analysis/base/number.h"
#include "analysis/estimate/coverage.h"
#include "analysis/series/correlation.h"
#include "analysis/settling/words.h"

namespace loadstair::settling {

using base::Outcome;
using base::Refusal;
using estimate::Estimate;

estimate::Quoted thermal_resistance(const Estimate& end_c, const Estimate& ambient_c,
                                    const Estimate& loss_w) {
  const estimate::Coverage loss = estimate::coverage(loss_w);
  if (!(loss.value > 0.0)) {
    return Refusal{"thermal resistance", "the loss of " + value_text(loss.value) +
                                             " W is not above zero: nothing heats the object"};
  }
  if (!(loss.low > 0.0)) {
    return Refusal{"thermal resistance", "the loss of " + value_text(loss.value) +
                                             " W is not told from zero (down to " + value_text(loss.low) +
                                             " W)"};
  }
  return estimate::ratio(end_c - ambient_c, loss_w, "thermal resistance");
}

estimate::Quoted at_highest_ambient(const Estimate& end_c, const Estimate& ambient_c,
                                    double highest_ambient_c) {
  if (!std::isfinite(highest_ambient_c)) {
    return Refusal{"case at the highest ambient", "the highest ambient is not a number"};
  }
  return end_c - ambient_c + highest_ambient_c;
}

namespace {

constexpr std::size_t kLeastReadings = 10;
/// Share of the temperature's variance that may be noise; it flattens the line by as much.
constexpr double kMostNoise = 0.02;

double mean_of(std::span<const double> values) {
  double sum = 0.0;
  for (const double value : values) sum += value;
  return sum / static_cast<double>(values.size());
}

/// Variance of single readings about a smooth course: second differences have six times as much.
double noise_variance(std::span<const double> values) {
  double sum = 0.0;
  for (std::size_t i = 2; i < values.size(); ++i) {
    const double second = values[i] - 2.0 * values[i - 1] + values[i - 2];
    sum += second * second;
  }
  return sum / (6.0 * static_cast<double>(values.size() - 2));
}

std::optional<Refusal> unusable(std::span<const double> temperature_c, std::span<const double> loss_w) {
  const char* place = "loss against temperature";
  if (temperature_c.size() != loss_w.size())
    return Refusal{place, "temperatures and losses differ in number"};
  if (temperature_c.size() < kLeastReadings) {
    return Refusal{place, base::print_integer(static_cast<std::int64_t>(temperature_c.size())) +
                              " readings are too few; " +
                              base::print_integer(static_cast<std::int64_t>(kLeastReadings)) + " are needed"};
  }
  for (std::size_t i = 0; i < loss_w.size(); ++i) {
    if (!std::isfinite(temperature_c[i]) || !std::isfinite(loss_w[i]))
      return Refusal{place, "a reading is not a number"};
  }
  return std::nullopt;
}

}  // namespace

Outcome<LossSlope> loss_with_temperature(std::span<const double> temperature_c,
                                         std::span<const double> loss_w) {
  if (const auto reason = unusable(temperature_c, loss_w)) return *reason;
  const std::size_t count = loss_w.size();
  const double mean_c = mean_of(temperature_c);
  const double mean_w = mean_of(loss_w);
  double squares = 0.0;
  double products = 0.0;
  for (std::size_t i = 0; i < count; ++i) {
    squares += (temperature_c[i] - mean_c) * (temperature_c[i] - mean_c);
    products += (temperature_c[i] - mean_c) * (loss_w[i] - mean_w);
  }
  if (!(squares > 0.0)) return Refusal{"loss against temperature", "the temperature never moved"};
  LossSlope out;
  out.count = count;
  out.slope_w_per_k = products / squares;
  const auto [least, most] = std::minmax_element(temperature_c.begin(), temperature_c.end());
  out.temperature_span_k = *most - *least;
  std::vector<double> residual(count);
  double rest = 0.0;
  for (std::size_t i = 0; i < count; ++i) {
    residual[i] = loss_w[i] - mean_w - out.slope_w_per_k * (temperature_c[i] - mean_c);
    rest += residual[i] * residual[i];
  }
  const series::Correlation correlation = series::integrated_correlation(residual);
  const double variance = rest / (static_cast<double>(count) - 2.0);
  out.slope_u_w_per_k = std::sqrt(variance / squares * correlation.inefficiency);
  out.degrees_of_freedom = std::max(1.0, correlation.effective_count - 2.0);
  out.half_width_w_per_k =
      estimate::student_t(estimate::kLevel, out.degrees_of_freedom) * out.slope_u_w_per_k;
  const double noise = noise_variance(temperature_c) / (squares / static_cast<double>(count));
  if (noise > kMostNoise) {
    out.why = "the temperature moved by little more than its noise";
  } else if (!(std::abs(out.slope_w_per_k) > out.half_width_w_per_k)) {
    out.why = "a slope of " + value_text(out.slope_w_per_k) + " +/- " + value_text(out.half_width_w_per_k) +
              " W/K is not told from none";
  } else {
    out.resolved = true;
  }
  return out;
}

namespace {

/// The slope as an estimate around which the change is had; its one source belongs to the step.
Estimate change_of(const LossSlope& slope, const AtEnd& measured) {
  const double remaining_k = measured.remaining_k.value();
  const std::string key = estimate::key::window(measured.run, measured.step, "loss against temperature");
  const std::string name = "loss against temperature, " + measured.step;
  const Estimate along = measured.remaining_k * slope.slope_w_per_k;
  if (slope.resolved) {
    // The variance of a product of two independent factors: b^2 u_r^2 + r^2 u_b^2 + u_b^2 u_r^2.
    const double reach_k = std::hypot(remaining_k, measured.remaining_k.standard_uncertainty());
    return along + Estimate{0.0, estimate::make_type_a(key, name, slope.degrees_of_freedom),
                            slope.slope_u_w_per_k * reach_k};
  }
  const estimate::Coverage remaining = estimate::coverage(measured.remaining_k);
  const double reach_k = std::max(std::abs(remaining.low), std::abs(remaining.high));
  const double half_width_w = slope.half_width_w_per_k * reach_k;
  return along + estimate::bounded(-half_width_w, half_width_w,
                                   estimate::make_type_b(key, name, estimate::Distribution::rectangular));
}

std::string text_of(const LossSlope& slope, const AtEnd& measured, const Estimate& change_w) {
  const std::string rest = value_text(measured.remaining_k.value()) + " K to the end temperature";
  if (slope.resolved) {
    return "loss " + std::string{slope.slope_w_per_k < 0.0 ? "falls" : "rises"} + " by " +
           value_text(std::abs(slope.slope_w_per_k)) + " +/- " + value_text(slope.half_width_w_per_k) +
           " W/K over " + value_text(slope.temperature_span_k) + " K; " + rest + ": " +
           value_text(change_w.value()) + " W";
  }
  return "no slope of loss against temperature resolved (" + slope.why + "); what its interval allows over " +
         rest + " is added: " + value_text(change_w.value()) + " W";
}

}  // namespace

Outcome<LossAtEnd> project_loss(const LossSlope& slope, const AtEnd& measured) {
  const double remaining_k = measured.remaining_k.value();
  if (!(std::abs(remaining_k) <= slope.temperature_span_k)) {
    return Refusal{"loss at the end temperature",
                   "the remaining " + value_text(remaining_k) + " K are more than the " +
                       value_text(slope.temperature_span_k) + " K that the step has shown"};
  }
  LossAtEnd out;
  out.projected = slope.resolved;
  out.change_w = change_of(slope, measured);
  out.loss_w = measured.loss_w + out.change_w;
  const double input_w = measured.input_w.value();
  const double moved_w = input_w + out.change_w.value();
  if (!(input_w > 0.0) || !(moved_w > 0.0)) {
    return Refusal{"efficiency at the end temperature", "the input power is not above zero"};
  }
  const double efficiency = measured.efficiency.value();
  out.efficiency =
      estimate::combine(efficiency * input_w / moved_w,
                        {{measured.efficiency, input_w / moved_w},
                         {measured.input_w, efficiency * out.change_w.value() / (moved_w * moved_w)},
                         {out.change_w, -efficiency * input_w / (moved_w * moved_w)}});
  out.text = text_of(slope, measured, out.change_w);
  return out;
}

}  // namespace loadstair::settling
