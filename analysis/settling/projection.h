// Variable projection for sums of exponentials; private to this room.
#pragma once

#include <optional>
#include <span>
#include <vector>

#include "analysis/settling/least_squares.h"

namespace loadstair::settling {

/// y = [constant +] sum c_i f(k_i x), f(u) = exp(-u), or 1 - exp(-u) for `saturating`.
/// fixed: the last rate is given and not searched.
struct ExponentialModel {
  bool constant = false;
  bool saturating = false;
  bool last_rate_fixed = false;
};

/// What is fitted: readings, or means of neighbouring readings with the variance of x among them.
struct Points {
  std::span<const double> x;
  std::span<const double> y;
  std::span<const double> spread;  ///< variance of x within each point, or empty for none

  [[nodiscard]] double spread_at(std::size_t i) const { return spread.empty() ? 0.0 : spread[i]; }
};

struct ExponentialSolution {
  std::vector<double> rate;
  std::vector<double> linear;                    ///< constant first, when there is one
  std::vector<double> linear_variance_factor;    ///< times the residual variance
  std::vector<double> log_rate_variance_factor;  ///< of ln k_i; a fixed rate has 0
  Column residual;
  double residual_sum_of_squares = 0.0;
};

/// Linear part at given rates; nullopt where the columns depend on each other. The mean of exp(-k x) over a
/// point is exp(-k x)(1 + k^2 spread/2), to the fourth order.
std::optional<LinearSolution> at_rates(const ExponentialModel& model, const Points& points,
                                       std::span<const double> rates);

/// Least squares in ln k with the linear parameters projected out: damped steps (Marquardt) until the sum of
/// squares no longer falls, then plain Gauss-Newton to the last digits. nullopt when the problem is singular
/// where it ends. Source: Golub and Pereyra 1973; Marquardt 1963.
std::optional<ExponentialSolution> descend(const ExponentialModel& model, const Points& points,
                                           std::vector<double> start_rates);

}  // namespace loadstair::settling
