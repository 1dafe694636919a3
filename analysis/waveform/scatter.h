// Type A uncertainty of a mean over whole cycles, from the scatter of single cycles; private to this room.
#pragma once

#include <span>
#include <vector>

#include "analysis/waveform/fundamental.h"

namespace loadstair::waveform {

struct Scatter {
  double standard_uncertainty = 0.0;
  int degrees_of_freedom = 0;  ///< 0: fewer than 3 parts, nothing is known
};

/// Single cycles of the window, or 20 equal parts (fewer of a short record) where it has none.
std::vector<SpanSum> parts_of(const CycleWindow& window, std::size_t samples);

/// Standard uncertainty of the mean of the parts' values, neighbours correlated or not.
Scatter scatter_of(std::span<const double> by_part);

}  // namespace loadstair::waveform
