#include "analysis/estimate/type_a.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/series/statistics.h"

namespace loadstair::estimate {

namespace {

/// A pivot of the correlation matrix below this is rounding of a quantity that the earlier ones determine.
constexpr double kLeastPivot = 1e-10;

std::string number(std::size_t index) {
  return base::print_integer(static_cast<std::int64_t>(index) + 1);
}

/// Lower triangle with L L^T = R, rows of a singular R filled as far as they go.
std::vector<std::vector<double>> factor_of_correlations(std::span<const series::SteadyWindow> windows) {
  const std::size_t count = windows.size();
  std::vector<std::vector<double>> lower(count, std::vector<double>(count, 0.0));
  for (std::size_t i = 0; i < count; ++i) {
    double left = 1;
    for (std::size_t j = 0; j < i; ++j) {
      double rest = series::correlation_of_residuals(windows[i].residual, windows[j].residual);
      for (std::size_t m = 0; m < j; ++m) rest -= lower[i][m] * lower[j][m];
      lower[i][j] = lower[j][j] > 0 ? rest / lower[j][j] : 0;
      left -= lower[i][j] * lower[i][j];
    }
    lower[i][i] = left > kLeastPivot ? std::sqrt(left) : 0;
  }
  return lower;
}

SourcePtr noise_source(const WindowId& id, std::size_t index, double degrees_of_freedom) {
  Source source;
  source.key = key::window(id.run, id.step, "noise " + number(index));
  source.name = "noise in the window of " + id.step;
  source.kind = Kind::type_a;
  source.degrees_of_freedom = degrees_of_freedom;
  source.sample = key::window(id.run, id.step, "noise");
  source.remedy = Remedy::longer_window;
  source.variance_left = 0.25;
  return make_source(std::move(source));
}

SourcePtr drift_source(const WindowId& id) {
  return make_type_b(key::window(id.run, id.step, "drift"), "drift in the window of " + id.step,
                     Distribution::rectangular);
}

SourcePtr bound_source(const WindowId& id, std::size_t index) {
  Source source;
  source.key = key::window(id.run, id.step, "bound " + number(index));
  source.name = "window of " + id.step + " too short: bound";
  source.distribution = Distribution::rectangular;
  source.remedy = Remedy::longer_window;
  source.variance_left = 0.25;
  return make_source(std::move(source));
}

}  // namespace

base::Outcome<std::vector<Estimate>> type_a_estimates(std::span<const series::SteadyWindow> windows,
                                                      const WindowId& id) {
  double degrees_of_freedom = std::numeric_limits<double>::infinity();
  for (std::size_t i = 0; i < windows.size(); ++i) {
    const series::SteadyWindow& window = windows[i];
    if (window.residual.size() != windows.front().residual.size()) {
      return base::Refusal{id.step + ", quantity " + number(i), "its readings are not of the same instants"};
    }
    if (window.too_short && !window.bound) {
      return base::Refusal{id.step + ", quantity " + number(i),
                           "a single reading says nothing of its fluctuation"};
    }
    if (!window.too_short) degrees_of_freedom = std::min(degrees_of_freedom, window.degrees_of_freedom);
  }
  std::vector<SourcePtr> noise;
  for (std::size_t i = 0; i < windows.size(); ++i) noise.push_back(noise_source(id, i, degrees_of_freedom));
  const SourcePtr drift = drift_source(id);
  const auto lower = factor_of_correlations(windows);
  std::vector<Estimate> out;
  for (std::size_t i = 0; i < windows.size(); ++i) {
    const series::SteadyWindow& window = windows[i];
    std::vector<Term> terms;
    for (std::size_t j = 0; j <= i && !window.too_short; ++j)
      terms.push_back({noise[j], window.u * lower[i][j]});
    if (window.too_short) terms.push_back({bound_source(id, i), *window.bound / std::numbers::sqrt3});
    terms.push_back({drift, window.drift_u});
    out.emplace_back(window.value, std::move(terms));
  }
  return out;
}

base::Outcome<std::vector<Estimate>> repeated_observations(std::span<const std::span<const double>> sets,
                                                           const WindowId& id) {
  std::vector<series::SteadyWindow> windows;
  for (std::size_t i = 0; i < sets.size(); ++i) {
    const auto found = series::statistics(sets[i]);
    if (!found) return base::Refusal{id.step + ", quantity " + number(i), found.refusal().text()};
    if (found->count < 2)
      return base::Refusal{id.step + ", quantity " + number(i), "needs at least two observations"};
    series::SteadyWindow window;
    window.count = found->count;
    window.value = found->mean;
    window.deviation = found->standard_deviation;
    window.effective_count = static_cast<double>(found->count);
    window.u = found->standard_deviation / std::sqrt(window.effective_count);
    window.degrees_of_freedom = window.effective_count - 1;
    for (const double value : sets[i]) window.residual.push_back(value - found->mean);
    windows.push_back(std::move(window));
  }
  return type_a_estimates(windows, id);
}

Quoted type_a_estimate(const series::SteadyWindow& window, const WindowId& id, std::string_view what) {
  auto all = type_a_estimates({&window, 1}, {id.run, id.step + ", " + std::string{what}});
  if (!all) return all.refusal();
  return all->front();
}

}  // namespace loadstair::estimate
