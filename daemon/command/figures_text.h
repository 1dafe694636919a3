// What a run says beyond its steps, in words: model, weighted figures, regulation, checks, decisions; and a
// step's budget.
#pragma once

#include <nlohmann/json_fwd.hpp>
#include <string>

namespace loadstair::command {

/// Sections with a headline each; nothing for what the run has nothing of.
[[nodiscard]] std::string figures_text(const nlohmann::json& result);

/// The budget of one step's efficiency and loss: contributions, their shares, and what would shrink them.
[[nodiscard]] std::string budget_text(const nlohmann::json& step);

/// Whether a limit was decided against the prototype.
[[nodiscard]] bool limit_failed(const nlohmann::json& result);

}  // namespace loadstair::command
