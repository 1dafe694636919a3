// How a run's losses go with the input voltage, for comparisons. Of this room only.
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "daemon/evaluation/result.h"
#include "daemon/evaluation/step_result.h"

namespace loadstair::evaluation {

/// The counted input's voltage of a step, V, magnitude; nullopt where there is none.
[[nodiscard]] std::optional<double> input_voltage_of(const StepResult& step);

/// Fills loss_per_volt around every point of the curve whose load was also measured at another input voltage
/// (within 2 % of rated power; moved there along the loss's slope): of the line to the nearest higher and
/// lower voltage. Anywhere between both lines, or from none to twice the one line's slope; rectangular,
/// common practice, no source. result   with points, pieces and around run      its name in keys
void add_loss_slopes(const std::vector<StepOutcome>& outcomes, const std::string& run, RunResult& result);

}  // namespace loadstair::evaluation
