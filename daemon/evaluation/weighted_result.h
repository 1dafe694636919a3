// European and CEC figures of a run. Of this room only.
#pragma once

#include <string>
#include <vector>

#include "daemon/evaluation/result.h"
#include "daemon/evaluation/step_result.h"
#include "daemon/setup/hookup.h"
#include "daemon/setup/stair.h"

namespace loadstair::evaluation {

/// Both figures with their sources; where one cannot be had, why. The European one comes from the curve at
/// rated input voltage, with the pieces of its loss model; levels within the stair's load tolerance of a
/// measured one are moved there. The CEC one is the mean over three input voltages where the stair asks for
/// all its levels at exactly three, else that at rated voltage ("CEC-weighted at 385 V").
/// outcomes  one per step
/// run       the run's name in keys
void add_weighted(const setup::Hookup& hookup, const setup::Stair& stair,
                  const std::vector<StepOutcome>& outcomes, const std::string& run, RunResult& result);

}  // namespace loadstair::evaluation
