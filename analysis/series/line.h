// A straight line through a time series.
#pragma once

#include <cstddef>
#include <span>
#include <vector>

#include "analysis/base/outcome.h"
#include "analysis/series/time_series.h"

namespace loadstair::series {

/// y(t) = at_middle + slope * (t - middle_s)
struct Line {
  double middle_s = 0;     ///< mid-window: halfway between the first and the last instant, s
  double at_middle = 0;    ///< value of the line there, unit of the values
  double slope_per_s = 0;  ///< unit of the values per second; 0 where all instants are equal
  double slope_u_per_s =
      0;  ///< standard uncertainty of the slope for uncorrelated residuals; 0 for two readings
  double residual_deviation = 0;  ///< with count - 2 degrees of freedom; 0 for two readings
  double duration_s = 0;          ///< last minus first instant
  std::size_t count = 0;

  [[nodiscard]] double at(double time_s) const { return at_middle + slope_per_s * (time_s - middle_s); }
};

/// Ordinary least squares. For correlated residuals multiply slope_u_per_s by sqrt(count / N_eff).
/// Errors: refused when empty, when the spans differ in length, when a number is not finite or instants
/// decrease. Source: any text on regression; JCGM 100:2008 H.3 for the uncertainty of the slope.
[[nodiscard]] base::Outcome<Line> fit_line(const TimeSeries& data);

/// Values minus the line, as many as readings.
[[nodiscard]] std::vector<double> residuals(const TimeSeries& data, const Line& line);

}  // namespace loadstair::series
