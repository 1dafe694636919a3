// Figures that belong to a run as a whole: idle powers, regulation, fold-back, start-up, closure. Of this
// room only.
#pragma once

#include <vector>

#include "daemon/evaluation/result.h"
#include "daemon/evaluation/step_result.h"

namespace loadstair::evaluation {

/// Fills no_load, standby, load_regulation, line_regulation, fold_back, start_up and closure of a result.
/// What has no value says why. fold_back stays empty where the stair file declares no overload circuit and
/// the output stays on its regulation line; start_up, where no capture of an output's voltage begins below
/// 10 % of what it ends at.
/// result    with its curve: a repeat is moved to the first visit's power by its slope
/// outcomes  one per step of the record, in order
void run_figures(RunResult& result, const std::vector<StepOutcome>& outcomes, const store::StoredRun& run,
                 const setup::Hookup& hookup, const setup::Stair& stair);

}  // namespace loadstair::evaluation
