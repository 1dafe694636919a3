// One step's results. Of this room only.
#pragma once

#include <vector>

#include "analysis/efficiency/step.h"
#include "daemon/evaluation/result.h"
#include "daemon/evaluation/track.h"
#include "daemon/setup/stair.h"

namespace loadstair::evaluation {

struct StepOutcome {
  StepResult result;
  efficiency::StepResult powers;  ///< for the curve; refused quantities where the step has none
};

/// `name` is the step's label, made unique within the run.
[[nodiscard]] StepOutcome step_outcome(const store::StoredRun& run, const setup::Hookup& hookup,
                                       const setup::Stair& stair, const std::vector<Track>& tracks,
                                       const store::StoredStep& step, const std::string& name);

}  // namespace loadstair::evaluation
