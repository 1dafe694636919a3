// Records that something went wrong with: every way in which a bench leaves a figure without its readings.
#pragma once

#include <functional>
#include <string>
#include <vector>

#include "simulation/record.h"

namespace loadstair::simulation {

struct Mutilation {
  std::string name;
  std::function<void(store::StoredRun&, setup::Hookup&)> apply;
};
[[nodiscard]] std::vector<Mutilation> mutilations();

}  // namespace loadstair::simulation
