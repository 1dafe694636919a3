// The largest line of a record with its share; private to this room (see largest_line() in sine_fit.h).
#pragma once

#include <span>

#include "analysis/base/outcome.h"

namespace loadstair::waveform {

struct Line {
  double frequency = 0.0;  ///< cycles per sample
  double share = 0.0;      ///< of the power without the mean, 0 to 1
};

/// Precondition: the samples are finite. Refusals as largest_line().
base::Outcome<Line> find_largest_line(std::span<const double> samples, double low, double high);

}  // namespace loadstair::waveform
