#include "analysis/series/steady_window.h"

#include <algorithm>
#include <cmath>
#include <limits>

#include "analysis/series/correlation.h"
#include "analysis/series/line.h"
#include "analysis/series/statistics.h"

namespace loadstair::series {

namespace {

/// Fewer readings than this follow any line too well for what is left to say something.
constexpr std::size_t kLeastForLine = 5;

double greatest_magnitude(std::span<const double> value) {
  double out = 0;
  for (const double v : value) out = std::max(out, std::abs(v));
  return out;
}

/// Residuals of readings that are all alike, or lie on a line, are what double precision leaves; their
/// pattern is no correlation.
bool only_rounding(std::span<const double> residual, std::span<const double> value) {
  return greatest_magnitude(residual) <=
         16 * std::numeric_limits<double>::epsilon() * greatest_magnitude(value);
}

/// What the slope does beyond its own noise.
double drift_of(const SteadyWindow& window) {
  const double resolved =
      window.slope_per_s * window.slope_per_s - window.slope_u_per_s * window.slope_u_per_s;
  if (!(resolved > 0)) return 0;
  return std::copysign(std::sqrt(resolved), window.slope_per_s) * window.duration_s / std::sqrt(12.0);
}

void judge_without_line(const TimeSeries& data, SteadyWindow& window) {
  const auto [least, greatest] = std::minmax_element(data.value.begin(), data.value.end());
  CompensatedSum sum;
  for (const double v : data.value) sum.add(v);
  window.value = sum.total() / static_cast<double>(window.count);
  window.slope_per_s = 0;
  window.slope_u_per_s = 0;
  window.too_short = true;
  window.effective_count = static_cast<double>(window.count);
  for (const double v : data.value) window.residual.push_back(v - window.value);
  if (window.count > 1) {
    window.deviation = statistics(data.value).value().standard_deviation;
    window.bound = std::max(*greatest - window.value, window.value - *least);
  }
}

}  // namespace

base::Outcome<SteadyWindow> steady_window(const TimeSeries& data, const SteadyWindowSettings& settings) {
  const auto fitted = fit_line(data);
  if (!fitted) return fitted.refusal();
  const Line& line = *fitted;
  SteadyWindow window;
  window.count = line.count;
  window.middle_s = line.middle_s;
  window.duration_s = line.duration_s;
  if (line.count < kLeastForLine) {
    judge_without_line(data, window);
    return window;
  }
  const double count = static_cast<double>(line.count);
  window.value = line.at_middle;
  window.slope_per_s = line.slope_per_s;
  window.deviation = line.residual_deviation;
  window.residual = residuals(data, line);

  const double interval_s = line.duration_s / (count - 1);
  const Correlation found = only_rounding(window.residual, data.value)
                                ? Correlation{1, count, 0}
                                : integrated_correlation(window.residual);
  window.correlation_time_s = std::max({found.inefficiency * interval_s, settings.declared_correlation_s,
                                        settings.stretch_correlation_s.value_or(0)});
  window.effective_count = found.effective_count;
  if (interval_s > 0) {
    window.effective_count =
        std::clamp(count * interval_s / window.correlation_time_s, 1.0, found.effective_count);
  }
  window.slope_u_per_s = line.slope_u_per_s * std::sqrt(count / window.effective_count);
  window.drift_u = drift_of(window);

  if (line.count < kLeastReadings || window.effective_count < kLeastCorrelationTimes) {
    window.too_short = true;
    // The line has taken two degrees of freedom out of the residuals.
    window.bound = greatest_magnitude(window.residual) * std::sqrt(count / (count - 2));
    return window;
  }
  CompensatedSum squares;
  for (const double r : window.residual) squares.add(r * r);
  window.u = std::sqrt(squares.total() / (count * (window.effective_count - 1)));
  window.degrees_of_freedom = window.effective_count - 1;
  return window;
}

}  // namespace loadstair::series
