// The loss models of a run's curve. Of this room only.
#pragma once

#include <cstddef>
#include <vector>

#include "analysis/efficiency/curve.h"
#include "daemon/evaluation/result.h"

namespace loadstair::evaluation {

/// Standard uncertainty that no level's loss falls below in a fit, W: q / sqrt 12 of the power's resolution,
/// as far as the sources tell.
[[nodiscard]] double floor_of(const std::vector<efficiency::CurvePoint>& points);

/// Splits the curve where a meter was on another range, fits the loss of each piece, and says what follows
/// from it: coefficients, whether the fit holds, where the efficiency is greatest. A piece that cannot be
/// fitted, or whose fit is not to be used, has the reason in place of figures.
/// draws  of the Monte Carlo interval of each peak
void add_models(RunResult& result, std::size_t draws);

}  // namespace loadstair::evaluation
