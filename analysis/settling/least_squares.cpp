#include "analysis/settling/least_squares.h"

#include <cmath>

namespace loadstair::settling {
namespace {

double dot(std::span<const double> a, std::span<const double> b) {
  double sum = 0.0;
  for (std::size_t i = 0; i < a.size(); ++i) sum += a[i] * b[i];
  return sum;
}

void subtract(std::span<double> from, double factor, std::span<const double> what) {
  for (std::size_t i = 0; i < from.size(); ++i) from[i] -= factor * what[i];
}

}  // namespace

std::optional<LinearSolution> solve(const std::vector<Column>& columns, std::span<const double> y) {
  const std::size_t n = columns.size();
  if (n == 0 || y.size() < n) return std::nullopt;
  std::vector<Column> q = columns;
  std::vector<std::vector<double>> r(n, std::vector<double>(n, 0.0));
  for (std::size_t j = 0; j < n; ++j) {
    const double size = std::sqrt(dot(q[j], q[j]));
    for (int pass = 0; pass < 2; ++pass) {
      for (std::size_t i = 0; i < j; ++i) {
        const double part = dot(q[i], q[j]);
        r[i][j] += part;
        subtract(q[j], part, q[i]);
      }
    }
    const double rest = std::sqrt(dot(q[j], q[j]));
    constexpr double kDependent = 1e-13;
    if (!(rest > kDependent * size) || !std::isfinite(rest)) return std::nullopt;
    r[j][j] = rest;
    for (double& value : q[j]) value /= rest;
  }
  LinearSolution out;
  out.residual.assign(y.begin(), y.end());
  std::vector<double> projection(n, 0.0);
  for (int pass = 0; pass < 2; ++pass) {
    for (std::size_t j = 0; j < n; ++j) {
      const double part = dot(q[j], out.residual);
      projection[j] += part;
      subtract(out.residual, part, q[j]);
    }
  }
  out.residual_sum_of_squares = dot(out.residual, out.residual);
  out.coefficient = projection;
  for (std::size_t j = n; j-- > 0;) {
    for (std::size_t k = j + 1; k < n; ++k) out.coefficient[j] -= r[j][k] * out.coefficient[k];
    out.coefficient[j] /= r[j][j];
  }
  // Rows of R^-1: (A^T A)^-1 = R^-1 R^-T.
  out.variance_factor.assign(n, 0.0);
  for (std::size_t column = 0; column < n; ++column) {
    std::vector<double> inverse(column + 1, 0.0);
    for (std::size_t j = column + 1; j-- > 0;) {
      double value = j == column ? 1.0 : 0.0;
      for (std::size_t k = j + 1; k <= column; ++k) value -= r[j][k] * inverse[k];
      inverse[j] = value / r[j][j];
      out.variance_factor[j] += inverse[j] * inverse[j];
    }
  }
  return out;
}

}  // namespace loadstair::settling
