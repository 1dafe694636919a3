#include <algorithm>
#include <cmath>
#include <numeric>

#include "analysis/settling/projection.h"
#include "analysis/settling/settling.h"

namespace loadstair::settling {
namespace {

using base::Refusal;

/// Slow terms first: the order in which terms come out of a descent means nothing.
void sort_terms(ExponentialSolution& solution) {
  const ExponentialSolution old = solution;
  std::vector<std::size_t> order(old.rate.size());
  std::iota(order.begin(), order.end(), std::size_t{0});
  std::sort(order.begin(), order.end(),
            [&](std::size_t a, std::size_t b) { return old.rate[a] < old.rate[b]; });
  for (std::size_t i = 0; i < order.size(); ++i) {
    solution.rate[i] = old.rate[order[i]];
    solution.linear[i] = old.linear[order[i]];
    solution.linear_variance_factor[i] = old.linear_variance_factor[order[i]];
    solution.log_rate_variance_factor[i] = old.log_rate_variance_factor[order[i]];
  }
}

/// Two rates that meet on the way down get stuck on each other. Starts spread about the geometric mean of the
/// given one are tried beside it, and the least sum of squares wins.
std::optional<ExponentialSolution> best_descent(const ExponentialModel& model, const Points& points,
                                                const std::vector<double>& start_rates) {
  std::optional<ExponentialSolution> best = descend(model, points, start_rates);
  if (start_rates.size() == 1) return best;
  double mean = 0.0;
  for (const double rate : start_rates) mean += std::log(rate) / static_cast<double>(start_rates.size());
  for (const double ratio : {1.5, 2.0, 3.0, 5.0}) {
    std::vector<double> rates;
    for (std::size_t i = 0; i < start_rates.size(); ++i) {
      const double place = static_cast<double>(i) - 0.5 * static_cast<double>(start_rates.size() - 1);
      rates.push_back(std::exp(mean + place * std::log(ratio)));
    }
    auto found = descend(model, points, rates);
    if (found && (!best || found->residual_sum_of_squares < best->residual_sum_of_squares))
      best = std::move(found);
  }
  if (best) sort_terms(*best);
  return best;
}

base::Outcome<DecayFit> fit(const ExponentialModel& model, std::span<const double> x,
                            std::span<const double> y, std::vector<double> start_rates) {
  const std::size_t terms = start_rates.size();
  if (x.size() != y.size() || terms == 0 || x.size() <= 2 * terms) {
    return Refusal{"decay fit", "as many x as y are needed, and more of them than parameters"};
  }
  for (std::size_t i = 0; i < x.size(); ++i) {
    if (!std::isfinite(x[i]) || !std::isfinite(y[i])) return Refusal{"decay fit", "a value is not finite"};
  }
  for (const double rate : start_rates) {
    if (!(rate > 0.0) || !std::isfinite(rate)) return Refusal{"decay fit", "start rates must be above zero"};
  }
  const auto found = best_descent(model, Points{x, y, {}}, start_rates);
  if (!found)
    return Refusal{"decay fit", "the terms cannot be told apart from this start; choose other rates"};
  DecayFit out;
  out.amplitude = found->linear;
  out.rate = found->rate;
  out.residual_sum_of_squares = found->residual_sum_of_squares;
  out.residual_standard_deviation =
      std::sqrt(found->residual_sum_of_squares / static_cast<double>(x.size() - 2 * terms));
  for (std::size_t i = 0; i < terms; ++i) {
    out.amplitude_standard_error.push_back(out.residual_standard_deviation *
                                           std::sqrt(found->linear_variance_factor[i]));
    out.rate_standard_error.push_back(out.rate[i] * out.residual_standard_deviation *
                                      std::sqrt(found->log_rate_variance_factor[i]));
  }
  return out;
}

}  // namespace

base::Outcome<DecayFit> fit_decays(std::span<const double> x, std::span<const double> y,
                                   std::span<const double> start_rates) {
  return fit({}, x, y, {start_rates.begin(), start_rates.end()});
}

base::Outcome<DecayFit> fit_saturation(std::span<const double> x, std::span<const double> y,
                                       double start_rate) {
  ExponentialModel model;
  model.saturating = true;
  return fit(model, x, y, {start_rate});
}

}  // namespace loadstair::settling
