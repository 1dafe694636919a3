#include "analysis/efficiency/peak.h"

#include <algorithm>
#include <array>
#include <cmath>

#include "analysis/base/number.h"

namespace loadstair::efficiency {

namespace {

/// Where a draw without quadratic loss has its peak, in greatest measured powers: any number beyond the rest.
constexpr double kFar = 1e3;

using Draw = std::span<const double>;  // p0, p1, p2

bool has_peak(Draw c) {
  return c[0] > 0 && c[2] > 0;
}

/// Power of the peak; what has none counts at the end where it belongs.
double power_of(Draw c, const LossModel& model) {
  const double far_w = kFar * model.greatest_w;
  if (!(c[0] > 0)) return 0;
  return c[2] > 0 ? std::min(far_w, std::sqrt(c[0] / c[2])) : far_w;
}

/// Greatest efficiency: at the peak, or within the measured span where there is none.
double efficiency_of(Draw c, const LossModel& model) {
  if (has_peak(c)) return 1 / (1 + c[1] + 2 * std::sqrt(c[0] * c[2]));
  const auto at = [&](double p) { return p / (p + c[0] + p * (c[1] + p * c[2])); };
  return std::max(at(model.least_w), at(model.greatest_w));
}

/// The standard uncertainty is the linear one: draws without a peak would rule that of the draws.
estimate::Coverage interval_of(const estimate::MonteCarlo& found, const Estimate& linear) {
  estimate::Coverage out;
  out.value = linear.value();
  out.low = found.symmetric.low;
  out.high = found.symmetric.high;
  out.standard_uncertainty = linear.standard_uncertainty();
  out.method = estimate::CoverageMethod::monte_carlo;
  return out;
}

std::string share(double value) {
  return base::print_significant(100 * value, 3) + " %";
}

}  // namespace

base::Outcome<Peak> peak_of(const LossModel& model, std::size_t draws, std::uint64_t seed) {
  const Quoted linear = model.peak_power();
  if (!linear) return linear.refusal();
  Peak out;
  out.power = *linear;
  out.efficiency = 1.0 / (1.0 + model.p1 + 2.0 * estimate::square_root(model.p0 * model.p2));
  const std::array<Estimate, 3> inputs{model.p0, model.p1, model.p2};
  estimate::MonteCarloSettings settings;
  settings.seed = seed;
  settings.draws = draws;
  std::size_t with_peak = 0;
  const auto power = estimate::propagate(
      [&](Draw c) {
        with_peak += has_peak(c) ? 1 : 0;
        return power_of(c, model);
      },
      inputs, settings);
  if (!power) return power.refusal();
  out.with_peak = static_cast<double>(with_peak) / static_cast<double>(power->draws);
  if (out.with_peak < kLeastWithPeak) {
    return base::Refusal{"peak efficiency",
                         "constant and quadratic loss are not resolved: both are above zero in " +
                             share(out.with_peak) + " of the draws, " + share(kLeastWithPeak) +
                             " are asked for"};
  }
  const auto efficiency =
      estimate::propagate([&](Draw c) { return efficiency_of(c, model); }, inputs, settings);
  if (!efficiency) return efficiency.refusal();
  out.power_interval = interval_of(*power, out.power);
  out.efficiency_interval = interval_of(*efficiency, out.efficiency);
  if (out.power_interval.low < model.least_w || out.power_interval.high > model.greatest_w) {
    out.remarks.emplace_back("the interval of the peak's power reaches beyond the measured span");
  }
  return out;
}

}  // namespace loadstair::efficiency
