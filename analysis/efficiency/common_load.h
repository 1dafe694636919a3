// A level moved to a load that both runs have in common. Of this room only.
#pragma once

#include "analysis/efficiency/comparison.h"

namespace loadstair::efficiency {

/// A level at a load that is known exactly.
struct AtLoad {
  Estimate efficiency;  ///< ratio
  Estimate loss;        ///< W
};

/// Level `at` of a run, moved to load_w along the slope of its loss with what is not known of power and
/// slope. load_w   above zero
[[nodiscard]] AtLoad at_load(const ComparedRun& run, std::size_t at, double load_w);

/// The other run's level in the reference's surroundings: along the slopes of the loss that are known, else
/// with what other surroundings may do as a source of the other run.
/// label    of the level
[[nodiscard]] AtLoad with_surroundings(const AtLoad& other, double load_w, const Around& reference,
                                       const Around& around, const std::string& run,
                                       const std::string& label);

}  // namespace loadstair::efficiency
