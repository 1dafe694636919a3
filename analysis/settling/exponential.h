// The searches behind the exponential fits; private to this room.
#pragma once

#include <optional>
#include <vector>

#include "analysis/settling/projection.h"
#include "analysis/settling/settling.h"

namespace loadstair::settling {

/// A trace with time counted in spans from its start, so that rates are near 1.
struct ScaledTrace {
  double span_s = 0.0;
  std::vector<double> x;
  std::vector<double> y;
};

/// Precondition: at least two samples, times rise.
ScaledTrace scaled(const Trace& trace);

/// At most `most` points, each the mean of neighbours.
ScaledTrace block_means(const ScaledTrace& trace, std::size_t most);

/// An end and one constant: the best of 48 rates on block means, then down on all samples.
std::optional<ExponentialSolution> search_one(const ScaledTrace& trace);

/// An end and two constants; with a fixed rate the slower one is given (per span) and only the faster
/// searched.
std::optional<ExponentialSolution> search_two(const ScaledTrace& trace, std::optional<double> fixed_rate);

ExponentialFit to_fit(const ExponentialSolution& solution, const Trace& trace,
                      const ScaledTrace& scaled_trace);

}  // namespace loadstair::settling
