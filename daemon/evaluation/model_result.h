// The loss model of a run's curve. Of this room only.
#pragma once

#include <vector>

#include "analysis/efficiency/curve.h"

namespace loadstair::evaluation {

/// Standard uncertainty that no level's loss falls below in a fit, W: q / sqrt 12 of the power's resolution,
/// as far as the sources tell.
[[nodiscard]] double floor_of(const std::vector<efficiency::CurvePoint>& points);

}  // namespace loadstair::evaluation
