// Compensated sums, mean, standard deviation and lag-1 autocorrelation.
#pragma once

#include <cstddef>
#include <span>

#include "analysis/base/outcome.h"

namespace loadstair::series {

/// A running sum that carries its own rounding error (Neumaier 1974), so that its result is rounded about
/// once.
class CompensatedSum {
 public:
  void add(double term);

  /// The sum, rounded once.
  [[nodiscard]] double total() const { return sum_ + correction_; }
  /// What total() leaves out: the exact sum is nearer to total() + remainder().
  [[nodiscard]] double remainder() const;

 private:
  double sum_ = 0;
  double correction_ = 0;
};

/// Statistics of a sample of independent or correlated values, all in the unit of the values.
struct Statistics {
  std::size_t count = 0;
  double mean = 0;
  double standard_deviation = 0;    ///< with count - 1; 0 for a single value
  double lag1_autocorrelation = 0;  ///< 0 where the values are all equal
  double least = 0;
  double greatest = 0;
};

/// Two-pass statistics with compensated sums about a mean held to twice double's precision.
/// value    finite values, any unit; at least one
/// Returns: mean, deviation and lag-1 autocorrelation as NIST's StRD defines them; they reproduce every
/// certified digit
///          of the StRD univariate sets that the double-precision data permit.
/// Errors:  refused when empty or when a value is not finite (its number is named).
/// Source:  Neumaier 1974; Chan, Golub, LeVeque 1983, corrected two-pass; NIST StRD, univariate summary
/// statistics.
[[nodiscard]] base::Outcome<Statistics> statistics(std::span<const double> value);

/// Pearson correlation of two equally long sets of deviations from their means or lines, within [-1, 1]; 0
/// where one of them is constant.
[[nodiscard]] double correlation_of_residuals(std::span<const double> a, std::span<const double> b);

}  // namespace loadstair::series
