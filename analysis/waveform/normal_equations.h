// Least squares with a handful of unknowns, by normal equations; private to this room.
#pragma once

#include <array>
#include <cmath>
#include <cstddef>
#include <optional>
#include <utility>

namespace loadstair::waveform {

/// Sums of one row of a least-squares problem: A^T A and A^T y. Columns should be of like size.
template <std::size_t kUnknowns>
class NormalEquations {
 public:
  void add(const std::array<double, kUnknowns>& row, double y) {
    for (std::size_t i = 0; i < kUnknowns; ++i) {
      for (std::size_t j = i; j < kUnknowns; ++j) matrix_[i][j] += row[i] * row[j];
      right_[i] += row[i] * y;
    }
  }

  /// Gaussian elimination with pivoting; nullopt when the problem is singular to 1e-13.
  [[nodiscard]] std::optional<std::array<double, kUnknowns>> solve() const {
    auto a = matrix_;
    auto b = right_;
    double largest = 0.0;
    for (std::size_t i = 0; i < kUnknowns; ++i) {
      largest = std::max(largest, std::abs(a[i][i]));
      for (std::size_t j = 0; j < i; ++j) a[i][j] = a[j][i];
    }
    for (std::size_t k = 0; k < kUnknowns; ++k) {
      std::size_t pivot = k;
      for (std::size_t i = k + 1; i < kUnknowns; ++i) {
        if (std::abs(a[i][k]) > std::abs(a[pivot][k])) pivot = i;
      }
      if (!(std::abs(a[pivot][k]) > 1e-13 * largest)) return std::nullopt;
      std::swap(a[k], a[pivot]);
      std::swap(b[k], b[pivot]);
      for (std::size_t i = k + 1; i < kUnknowns; ++i) {
        const double factor = a[i][k] / a[k][k];
        for (std::size_t j = k; j < kUnknowns; ++j) a[i][j] -= factor * a[k][j];
        b[i] -= factor * b[k];
      }
    }
    for (std::size_t k = kUnknowns; k-- > 0;) {
      for (std::size_t j = k + 1; j < kUnknowns; ++j) b[k] -= a[k][j] * b[j];
      b[k] /= a[k][k];
    }
    return b;
  }

 private:
  std::array<std::array<double, kUnknowns>, kUnknowns> matrix_{};
  std::array<double, kUnknowns> right_{};
};

}  // namespace loadstair::waveform
