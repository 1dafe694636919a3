// How many independent values a correlated stretch is worth.
#pragma once

#include <cstddef>
#include <span>

namespace loadstair::series {

/// Integrated autocorrelation of a stretch of residuals.
struct Correlation {
  double inefficiency = 1;     ///< g = 1 + 2 sum rho_k over the initial positive sequence, at least 1
  double effective_count = 0;  ///< N / g, within [1, N]
  std::size_t last_lag = 0;    ///< last lag that was counted
};

/// Autocorrelation summed in pairs of neighbouring lags until a pair is no longer positive, the pairs made
/// non-increasing on the way.
/// residual  deviations from the mean or line, equally spaced as far as the readings are; any length
/// Returns:  g = 1 (N_eff = N) for fewer than 4 values or a constant stretch. Negative correlation is not
/// credited. Cost:     N times the number of counted lags. Source:   Geyer 1992, Statistical Science 7, 473,
/// initial positive and initial monotone sequence estimators.
[[nodiscard]] Correlation integrated_correlation(std::span<const double> residual);

}  // namespace loadstair::series
