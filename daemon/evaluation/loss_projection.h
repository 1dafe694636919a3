// A step's loss and efficiency moved to where its temperature ends. Of this room only.
#pragma once

#include <span>
#include <vector>

#include "analysis/efficiency/step.h"
#include "daemon/evaluation/port_step.h"
#include "daemon/evaluation/temperature_result.h"

namespace loadstair::evaluation {

/// Fills loss_projected, efficiency_projected and projection_text of `result` from the first temperature
/// point that has an end: its soak shows how the loss goes with temperature. Leaves the figures empty where
/// the step has no such point, no loss with a known uncertainty, or the loss was not read all through the
/// soak; projection_text says why where there is a point. begun_s   when the set point was applied
void fill_projection(StepResult& result, const StepValues& values, const std::vector<Track>& tracks,
                     const efficiency::StepResult& totals, std::span<const EndTemperature> ends,
                     double begun_s);

}  // namespace loadstair::evaluation
