// The record that a run on a drawn bench leaves: readings as meters give them.
#pragma once

#include <string>
#include <vector>

#include "daemon/setup/stair.h"
#include "daemon/store/reader.h"
#include "simulation/plant.h"

namespace loadstair::simulation {

struct Recorded {
  store::StoredRun run;
  setup::Stair stair;
  std::vector<Truth> truths;   ///< one per step of the run
  std::vector<Moment> middle;  ///< the mean operating point of each step
};

/// levels  which of the bench's levels the run visits, in this order
/// run     names what is new in this run: two names, two runs
[[nodiscard]] Recorded record_run(const Bench& bench, const Board& board,
                                  const std::vector<std::size_t>& levels, std::int64_t run);

/// The range a meter is on for a signal, index into its ranges.
[[nodiscard]] std::size_t range_for(const Meter& meter, double signal);

/// Resistances of a port: nominal ones, or as they are. The names are the simulation's own.
[[nodiscard]] Wiring wiring_of(const Bench& bench, const PortPlan& port, const PortMoment& moment,
                               bool as_it_is);

}  // namespace loadstair::simulation
