// Results held against limits, by one rule. Of this room only.
#pragma once

#include <vector>

#include "daemon/evaluation/result.h"
#include "daemon/evaluation/step_result.h"
#include "daemon/setup/stair.h"

namespace loadstair::evaluation {

/// Fills decisions and decision_rule of a result that is otherwise complete. A limit of the stair file's own
/// is decided at every level that has the figure, a table's rows on the captures of every level; a figure
/// without a known uncertainty decides nothing, and says so. Nothing without limits. Source: JCGM 106:2012;
/// ILAC-G8:09/2019.
void decide_limits(RunResult& result, const std::vector<StepOutcome>& outcomes, const setup::Stair& stair);

}  // namespace loadstair::evaluation
