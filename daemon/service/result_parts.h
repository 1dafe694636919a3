// The parts that a run's results are printed from. Of this room only.
#pragma once

#include <nlohmann/json.hpp>
#include <vector>

#include "daemon/evaluation/result.h"

namespace loadstair::service {

template <class Item>
[[nodiscard]] nlohmann::json list_of(const std::vector<Item>& items, nlohmann::json (*print)(const Item&)) {
  nlohmann::json list = nlohmann::json::array();
  for (const auto& item : items) list.push_back(print(item));
  return list;
}

[[nodiscard]] nlohmann::json budget_json(const evaluation::BudgetEntry& entry);
[[nodiscard]] nlohmann::json step_json(const evaluation::StepResult& step);
/// Everything of a run but its steps.
[[nodiscard]] nlohmann::json run_json(const evaluation::RunResult& run);

}  // namespace loadstair::service
