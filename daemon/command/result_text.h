// Results for a person: a table per step, the weighted figures, what is remarkable. Prints what the result
// says and computes nothing.
#pragma once

#include <nlohmann/json_fwd.hpp>
#include <string>

namespace loadstair::command {

/// result  as service::to_json(RunResult) gives it.
[[nodiscard]] std::string result_table(const nlohmann::json& result);

/// "96.42 ±0.31" in units of `scale` (100 for percent) with the interval's two significant digits; "low to
/// high" where the interval has no U; "-" with nothing known.
[[nodiscard]] std::string estimate_text(const nlohmann::json& estimate, double scale = 1.0);

}  // namespace loadstair::command
