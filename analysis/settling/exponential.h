// The searches behind the exponential fits; private to this room.
#pragma once

#include <cstddef>
#include <optional>
#include <vector>

#include "analysis/settling/projection.h"
#include "analysis/settling/settling.h"

namespace loadstair::settling {

/// A trace with time counted in spans from its start, so that rates are near 1; or means of neighbouring
/// readings of it.
struct ScaledTrace {
  double span_s = 0.0;
  std::vector<double> x;
  std::vector<double> y;
  std::vector<double> spread;  ///< variance of x within each mean; empty for single readings

  [[nodiscard]] Points points() const { return {x, y, spread}; }
};

/// Precondition: at least two samples, times rise.
ScaledTrace scaled(const Trace& trace);

/// At most `most` points, each the mean of neighbours. Fits on them lose nothing but speed's cost: the means
/// of the exponential over a point are known, and what the readings scatter within a point is independent of
/// its mean.
ScaledTrace block_means(const ScaledTrace& trace, std::size_t most);

/// What the fits work on: readings up to 256, beyond that 128 means.
ScaledTrace fitting_points(const Trace& trace);

/// An end and one constant: the best of 48 rates, then down.
std::optional<ExponentialSolution> search_one(const ScaledTrace& trace);

/// Sum of squares that the best of the 48 rates leaves on at most 64 means: for comparing many stretches
/// quickly.
double coarse_sum_one(const ScaledTrace& trace);

/// An end and two constants: the best of 153 pairs, then down.
std::optional<ExponentialSolution> search_two(const ScaledTrace& trace);

ExponentialFit to_fit(const ExponentialSolution& solution, const Trace& trace,
                      const ScaledTrace& scaled_trace);

}  // namespace loadstair::settling
