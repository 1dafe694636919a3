#include "analysis/series/correlation.h"

#include <algorithm>

namespace loadstair::series {

namespace {

/// Autocovariance at a lag, divisor N as Geyer's argument wants it.
double autocovariance(std::span<const double> residual, std::size_t lag) {
  double sum = 0;
  for (std::size_t i = lag; i < residual.size(); ++i) sum += residual[i] * residual[i - lag];
  return sum / static_cast<double>(residual.size());
}

}  // namespace

Correlation integrated_correlation(std::span<const double> residual) {
  Correlation out;
  const std::size_t count = residual.size();
  out.effective_count = static_cast<double>(count);
  if (count < 4) return out;
  const double variance = autocovariance(residual, 0);
  if (!(variance > 0)) return out;

  double pairs = 0;
  double least_pair = 2 * variance;
  for (std::size_t lag = 0; lag + 1 < count; lag += 2) {
    const double first = lag == 0 ? variance : autocovariance(residual, lag);
    const double pair = first + autocovariance(residual, lag + 1);
    if (!(pair > 0)) break;
    least_pair = std::min(least_pair, pair);
    pairs += least_pair;
    out.last_lag = lag + 1;
  }
  const double n = static_cast<double>(count);
  out.inefficiency = std::clamp((2 * pairs - variance) / variance, 1.0, n);
  out.effective_count = n / out.inefficiency;
  return out;
}

}  // namespace loadstair::series
