// Channels whose readings fell at different instants, brought onto common ones.
#pragma once

#include <cstddef>
#include <span>
#include <vector>

#include "analysis/base/outcome.h"
#include "analysis/series/time_series.h"

namespace loadstair::series {

/// One series read off at the instants of another.
struct Aligned {
  std::vector<double> value;         ///< one per instant that was kept
  std::vector<std::size_t> instant;  ///< numbers of the wanted instants that were kept, increasing
  double curvature_bound =
      0;                    ///< h^2/8 * max|f''|, unit of the values; f'' from parabolas over nine readings
  double timing_bound = 0;  ///< half-width of the instants times the greatest slope of those parabolas
};

/// Linear interpolation; instants before the first or after the last reading are left out, never
/// extrapolated. from          readings, instants increasing (equal ones are averaged) at_s          wanted
/// instants, s, not decreasing half_width_s  half-width of an instant, s, of both series together Curvature
/// is taken from parabolas over nine neighbouring readings, so that noise of single readings does not pass
/// for curvature; fluctuation faster than that is the business of fluctuation_bound().
/// Errors: refused when a span is empty or disordered, or a number is not finite.
/// Source: the error term of linear interpolation, h^2/8 max|f''| (any text on numerical analysis).
[[nodiscard]] base::Outcome<Aligned> align(const TimeSeries& from, std::span<const double> at_s,
                                           double half_width_s);

/// Several series brought onto the instants of the one with the longest mean interval, over the time that all
/// cover.
struct AlignedSet {
  std::vector<double> time_s;
  std::vector<std::vector<double>> value;  ///< one row per series, each as long as time_s
  std::vector<double> curvature_bound;     ///< per series
  std::vector<double> timing_bound;        ///< per series
};

/// half_width_s  one per series
/// Errors: as align(); refused too when no instant is covered by all.
[[nodiscard]] base::Outcome<AlignedSet> align_all(std::span<const TimeSeries> series,
                                                  std::span<const double> half_width_s);

/// |mean(v i) - mean(v) mean(i)| <= s_v s_i: what fluctuation that polling cannot align may add to a product.
/// Source: the Cauchy-Schwarz inequality.
[[nodiscard]] double fluctuation_bound(double deviation_a, double deviation_b);

}  // namespace loadstair::series
