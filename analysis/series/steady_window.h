// Type A evaluation of a steady window: the value at mid-window, its drift, and how well the mean is known.
#pragma once

#include <cstddef>
#include <optional>
#include <vector>

#include "analysis/base/outcome.h"
#include "analysis/series/time_series.h"

namespace loadstair::series {

inline constexpr std::size_t kLeastReadings = 20;
inline constexpr double kLeastCorrelationTimes = 20;

struct SteadyWindowSettings {
  /// Time over which the meter itself averages or filters, s; successive readings closer than this are not
  /// independent.
  double declared_correlation_s = 0;
  /// Correlation time found over the whole steady stretch, s, where the window is a part of it; the larger
  /// one counts.
  std::optional<double> stretch_correlation_s;
};

/// One quantity over one steady window. Values in the unit of the series.
struct SteadyWindow {
  std::size_t count = 0;
  double middle_s = 0;
  double duration_s = 0;
  double value = 0;  ///< of the fitted line at mid-window
  double slope_per_s = 0;
  double slope_u_per_s = 0;  ///< for the correlation found
  /// Signed as the slope: sqrt(slope^2 - u(slope)^2) * duration / sqrt(12), zero for a slope within its own
  /// uncertainty: that much slope is what noise gives, and noise is counted in u.
  double drift_u = 0;
  double deviation = 0;           ///< standard deviation of the residuals about the line
  double correlation_time_s = 0;  ///< g * mean interval, at least the declared one
  double effective_count = 0;     ///< N_eff within [1, N]
  double u = 0;                   ///< Type A standard uncertainty of the mean; 0 when too short
  double degrees_of_freedom = 0;  ///< N_eff - 1; 0 when too short
  bool too_short = false;         ///< under 20 readings or under 20 correlation times
  /// When too short: half-width that the mean stays within, as far as the readings show: the largest
  /// deviation from the line, not reduced by the number of readings. None for a single reading: nothing is
  /// known of its fluctuation.
  std::optional<double> bound;
  std::vector<double>
      residual;  ///< deviations from the line, for covariances with other series of the window
};

/// Removes the line, then u^2 = sum r^2 / (N (N_eff - 1)), nu = N_eff - 1.
/// Errors: refused when empty, of unequal length, not finite, or with decreasing instants.
/// Source: JCGM 100:2008 4.2; Zieba 2010, Metrology and Measurement Systems 17, 3; Geyer 1992 for N_eff.
[[nodiscard]] base::Outcome<SteadyWindow> steady_window(const TimeSeries& data,
                                                        const SteadyWindowSettings& = {});

}  // namespace loadstair::series
