// Is a profile one that an instrument can be run by?
#pragma once

#include "analysis/base/outcome.h"
#include "drivers/instrument/profile.h"

namespace loadstair::instrument {

/// Looks for what would make a profile useless or unsafe. The place of a refusal is the path within the
/// profile
/// ("queries[0].values[1]", "values[2].line_pattern"), for whoever knows the file's lines.
[[nodiscard]] base::Outcome<void> check_profile(const Profile& profile);

}  // namespace loadstair::instrument
