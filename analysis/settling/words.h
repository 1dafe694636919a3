// Checks and wordings shared inside this room.
#pragma once

#include <optional>
#include <string>

#include "analysis/base/outcome.h"
#include "analysis/settling/settling.h"

namespace loadstair::settling {

/// Spans of unequal length, times that do not rise, values that are not finite.
std::optional<base::Refusal> disorder(const Trace& trace);

/// "45 s", "7.5 min", "2.1 h".
std::string duration_text(double seconds);
/// Three significant digits.
std::string value_text(double value);

}  // namespace loadstair::settling
