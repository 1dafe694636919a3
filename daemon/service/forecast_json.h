// A forecast as JSON: what `check --json` prints. Translation only.
#pragma once

#include <nlohmann/json_fwd.hpp>

#include "daemon/evaluation/forecast.h"

namespace loadstair::service {

/// {"steps": [{"label", "kind", "result_state", "input_power", "output_power", "efficiency", "loss",
/// "budget", "loss_budget", "helps_most", "helps_loss_most", "remarks"}], "bench_checks", "remarks"}; figures
/// as in results.
[[nodiscard]] nlohmann::json to_json(const evaluation::Forecast& forecast);

}  // namespace loadstair::service
