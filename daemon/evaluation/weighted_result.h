// European and CEC figures of a run. Of this room only.
#pragma once

#include "daemon/evaluation/result.h"
#include "daemon/setup/hookup.h"
#include "daemon/setup/stair.h"

namespace loadstair::evaluation {

/// Both figures with their sources, from the points of the curve and its model; where one cannot be had, why.
void add_weighted(const setup::Hookup& hookup, const setup::Stair& stair, RunResult& result);

}  // namespace loadstair::evaluation
