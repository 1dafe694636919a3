// Dense linear least squares with few columns; private to this room.
#pragma once

#include <cstddef>
#include <optional>
#include <span>
#include <vector>

namespace loadstair::settling {

using Column = std::vector<double>;

struct LinearSolution {
  std::vector<double> coefficient;
  Column residual;  ///< y minus the fit
  double residual_sum_of_squares = 0.0;
  std::vector<double> variance_factor;  ///< diagonal of (A^T A)^-1
};

/// Modified Gram-Schmidt, each column orthogonalised twice (Bjorck 1967, 1994). Columns may be of any size.
/// nullopt when a column depends on those before it to about 1e-13 of its length, or there are fewer rows
/// than columns.
std::optional<LinearSolution> solve(const std::vector<Column>& columns, std::span<const double> y);

}  // namespace loadstair::settling
