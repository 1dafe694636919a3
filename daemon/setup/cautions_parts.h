// The parts of cautions(). For cautions*.cpp only.
#pragma once

#include <vector>

#include "daemon/setup/explain.h"

namespace loadstair::setup {

/// What the checks of the bench cannot tell as they are written, what is dangerous in them, and which are
/// missing.
void find_in_checks(const Hookup& hookup, const Stair& stair, std::vector<Finding>& findings);

/// Limits that this bench and this stair cannot decide.
void find_in_limits(const Hookup& hookup, const Stair& stair, std::vector<Finding>& findings);

/// Specifications that do not hold at this ambient, or whose date nobody knows. `stair` may be null.
void find_in_conditions(const Hookup& hookup, const Stair* stair, std::vector<Finding>& findings);

}  // namespace loadstair::setup
