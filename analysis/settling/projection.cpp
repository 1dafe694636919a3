#include "analysis/settling/projection.h"

#include <algorithm>
#include <cmath>

namespace loadstair::settling {
namespace {

/// Mean of exp(-k x) over a point.
double decay(const Points& points, std::size_t i, double rate) {
  return std::exp(-rate * points.x[i]) * (1.0 + 0.5 * rate * rate * points.spread_at(i));
}

std::vector<Column> model_columns(const ExponentialModel& model, const Points& points,
                                  std::span<const double> rates) {
  std::vector<Column> columns;
  const std::size_t count = points.x.size();
  if (model.constant) columns.emplace_back(count, 1.0);
  for (const double rate : rates) {
    Column column(count);
    for (std::size_t i = 0; i < count; ++i) {
      column[i] = model.saturating ? -std::expm1(-rate * points.x[i]) : decay(points, i, rate);
    }
    columns.push_back(std::move(column));
  }
  return columns;
}

/// d(model)/d ln k of one term.
Column slope_column(const ExponentialModel& model, const Points& points, double rate, double amplitude) {
  Column column(points.x.size());
  const double sign = model.saturating ? 1.0 : -1.0;
  for (std::size_t i = 0; i < column.size(); ++i) {
    const double spread = rate * rate * points.spread_at(i);
    column[i] = sign * amplitude * std::exp(-rate * points.x[i]) *
                (rate * points.x[i] * (1.0 + 0.5 * spread) - spread);
  }
  return column;
}

}  // namespace

std::optional<LinearSolution> at_rates(const ExponentialModel& model, const Points& points,
                                       std::span<const double> rates) {
  return solve(model_columns(model, points, rates), points.y);
}

namespace {

double length_of(const Column& column) {
  double square = 0.0;
  for (const double value : column) square += value * value;
  return std::sqrt(square);
}

/// [model columns, slope columns]; with damping, rows sqrt(damping) |slope column| below, so that steps in ln
/// k stay small where the data do not fix them (Marquardt 1963).
std::vector<Column> step_columns(const ExponentialModel& model, const Points& points,
                                 const std::vector<double>& rates, const LinearSolution& at,
                                 std::size_t searched, double damping) {
  std::vector<Column> columns = model_columns(model, points, rates);
  const std::size_t linear = columns.size();
  const std::size_t first_term = model.constant ? 1 : 0;
  for (std::size_t i = 0; i < searched; ++i) {
    columns.push_back(slope_column(model, points, rates[i], at.coefficient[first_term + i]));
  }
  if (damping == 0.0) return columns;
  for (std::size_t i = 0; i < searched; ++i) {
    const double weight = std::sqrt(damping) * length_of(columns[linear + i]);
    for (std::size_t c = 0; c < columns.size(); ++c) columns[c].push_back(c == linear + i ? weight : 0.0);
  }
  return columns;
}

double largest_of(const std::vector<double>& steps) {
  double largest = 0.0;
  for (const double step : steps) largest = std::max(largest, std::abs(step));
  return largest;
}

/// Steps of ln k; empty when the problem is singular.
std::vector<double> step(const ExponentialModel& model, const Points& points,
                         const std::vector<double>& rates, const LinearSolution& at, std::size_t searched,
                         double damping) {
  const auto columns = step_columns(model, points, rates, at, searched, damping);
  // The residual, not y, on the right: the steps keep their digits when the residual is small.
  Column right = at.residual;
  right.resize(columns.front().size(), 0.0);
  const auto solution = solve(columns, right);
  if (!solution) return {};
  return {solution->coefficient.end() - static_cast<std::ptrdiff_t>(searched), solution->coefficient.end()};
}

std::vector<double> moved(const std::vector<double>& rates, const std::vector<double>& steps) {
  std::vector<double> out = rates;
  for (std::size_t i = 0; i < steps.size(); ++i) out[i] *= std::exp(std::clamp(steps[i], -2.0, 2.0));
  return out;
}

}  // namespace

std::optional<ExponentialSolution> descend(const ExponentialModel& model, const Points& points,
                                           std::vector<double> rates) {
  std::optional<LinearSolution> now = at_rates(model, points, rates);
  if (!now) return std::nullopt;
  const std::size_t searched = rates.size() - (model.last_rate_fixed ? 1 : 0);
  constexpr int kIterations = 500;
  // Steps below this are judged by plain Gauss-Newton: the flat sum of squares no longer can.
  constexpr double kNear = 1e-5;
  constexpr double kStagnant = 1e-9;  // relative fall of the sum of squares
  constexpr int kMostStagnant = 5;
  constexpr double kConverged = 1e-14;
  constexpr double kMostDamping = 1e12;
  double damping = 1e-2;
  int stagnant = 0;
  for (int iteration = 0; iteration < kIterations && damping < kMostDamping && stagnant < kMostStagnant;
       ++iteration) {
    const auto steps = step(model, points, rates, *now, searched, damping);
    if (steps.empty()) {
      damping *= 10.0;
      continue;
    }
    auto next = at_rates(model, points, moved(rates, steps));
    if (!next || !(next->residual_sum_of_squares < now->residual_sum_of_squares)) {
      if (largest_of(steps) < kNear) break;
      damping *= 10.0;
      continue;
    }
    const double fall = 1.0 - next->residual_sum_of_squares / now->residual_sum_of_squares;
    stagnant = fall < kStagnant ? stagnant + 1 : 0;
    rates = moved(rates, steps);
    now = std::move(next);
    damping *= 0.1;
  }
  double before = kNear;
  for (int polish = 0; polish < 20; ++polish) {
    const auto steps = step(model, points, rates, *now, searched, 0.0);
    if (steps.empty() || !(largest_of(steps) < before)) break;
    before = largest_of(steps);
    auto next = at_rates(model, points, moved(rates, steps));
    if (!next) break;
    rates = moved(rates, steps);
    now = std::move(next);
    if (before < kConverged) break;
  }
  const auto full = solve(step_columns(model, points, rates, *now, searched, 0.0), now->residual);
  if (!full) return std::nullopt;
  ExponentialSolution out;
  out.rate = rates;
  out.linear = now->coefficient;
  const auto split = full->variance_factor.begin() + static_cast<std::ptrdiff_t>(now->coefficient.size());
  out.linear_variance_factor.assign(full->variance_factor.begin(), split);
  out.log_rate_variance_factor.assign(split, full->variance_factor.end());
  out.log_rate_variance_factor.resize(rates.size(), 0.0);
  out.residual = std::move(now->residual);
  out.residual_sum_of_squares = now->residual_sum_of_squares;
  return out;
}

}  // namespace loadstair::settling
