// Scope files of an ideal run. Of this room only.
#pragma once

#include "daemon/evaluation/ideal_run.h"

namespace loadstair::evaluation {

/// One file per scope, in the middle of the step's window: sines on AC ports; on DC ports the declared
/// ripple, or a thousandth of the current where none is declared, at twice the output's frequency. As a scope
/// of twelve bits shows them. A capture on an AC port of which nothing is known has 50 Hz.
void add_ideal_captures(store::StoredRun& run, const setup::Hookup& hookup, const setup::Stair& stair,
                        const StepTruth& truth, const store::StoredStep& step);

}  // namespace loadstair::evaluation
