// The control socket of a rehearsed bench: what a person would do by hand there.
#pragma once

#include <string>

#include "analysis/base/outcome.h"

namespace loadstair::command {

/// Sends one line ("hand lamps 3"), waits for the answer. See rehearsal::RehearsedBench for the lines.
/// Refusal: nobody listens at `socket_path`, or the bench answered "error WHY".
[[nodiscard]] base::Outcome<std::string> ask_rehearsal(const std::string& socket_path,
                                                       const std::string& line, double limit_s = 15.0);

}  // namespace loadstair::command
