// What a run would give, in words, before power is on. Of this room only.
#pragma once

#include <nlohmann/json_fwd.hpp>
#include <string>

namespace loadstair::command {

/// A table of the steps, what would help most, and what stands in the way. forecast: as the service prints
/// it.
[[nodiscard]] std::string forecast_text(const nlohmann::json& forecast);

}  // namespace loadstair::command
