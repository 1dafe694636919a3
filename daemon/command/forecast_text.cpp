#include "daemon/command/forecast_text.h"

#include <nlohmann/json.hpp>
#include <utility>
#include <vector>

#include "analysis/base/number.h"
#include "daemon/command/result_text.h"
#include "daemon/command/text_table.h"

namespace loadstair::command {
namespace {

using nlohmann::json;

/// A figure; one without an interval as what it would be about.
std::string figure_text(const json& figure, double scale) {
  if (figure.contains("indicated"))
    return "about " + base::print_significant(figure["indicated"].get<double>() * scale, 4);
  return estimate_text(figure, scale);
}

bool idle(const json& step) {
  return step["kind"] == "no load" || step["kind"] == "standby";
}

Row row_of(const json& step) {
  const auto& budget = step["budget"].empty() ? step["loss_budget"] : step["budget"];
  std::string largest = "-";
  if (!budget.empty()) {
    largest = budget.front()["source"].get<std::string>() + " (" +
              base::print_fixed(budget.front()["share"].get<double>() * 100.0, 0) + " % of the variance)";
  }
  // Without a load all that goes in is lost.
  if (idle(step))
    return {step["label"].get<std::string>(), "-", "-", figure_text(step["input_power"], 1.0), largest};
  return {step["label"].get<std::string>(), figure_text(step["output_power"], 1.0),
          figure_text(step["efficiency"], 100.0), figure_text(step["loss"], 1.0), largest};
}

/// Of an interval by Monte Carlo, whose two sides may differ, half of its length.
double half_width_of(const json& estimate) {
  return (estimate["high"].get<double>() - estimate["low"].get<double>()) / 2.0;
}

/// Steps in which the same thing helps most, under one head.
std::string actions_text(const json& steps) {
  std::vector<std::pair<std::string, std::string>> actions;
  for (const auto& step : steps) {
    const auto& best = step["helps_most"];
    if (!best.is_object() || !step["efficiency"]["value"].is_number()) continue;
    const std::string head = best["source"].get<std::string>() + ": " + best["action"].get<std::string>();
    const std::string line = step["label"].get<std::string>() + ": \u00b1" +
                             base::print_significant(half_width_of(step["efficiency"]) * 100.0, 2) +
                             " to \u00b1" +
                             base::print_significant(best["expanded_if_done"].get<double>() * 100.0, 2);
    auto place = actions.begin();
    while (place != actions.end() && place->first != head) ++place;
    if (place == actions.end()) {
      actions.emplace_back(head, line);
    } else {
      place->second += ", " + line;
    }
  }
  std::string text;
  for (const auto& [head, lines] : actions) text += "  " + head + "\n    " + lines + "\n";
  return text.empty() ? text : "\nWhat would help the efficiency most (half-widths in points)\n" + text;
}

std::string why_text(const json& steps) {
  std::string text;
  for (const auto& step : steps) {
    const std::string label = step["label"].get<std::string>();
    const auto& efficiency = step["efficiency"];
    const std::string kind = step["kind"].get<std::string>();
    const bool wanted = kind == "level" || kind == "closure";
    if (wanted && !efficiency["value"].is_number())
      text += "  " + label + ": no efficiency: " + efficiency.value("why", std::string{}) + "\n";
    for (const auto& remark : step["remarks"]) text += "  " + label + ": " + remark.get<std::string>() + "\n";
  }
  return text;
}

}  // namespace

std::string forecast_text(const json& forecast) {
  const auto& steps = forecast["steps"];
  if (steps.empty()) return "";
  std::vector<Row> rows = {{"step", "output W", "efficiency %", "loss W", "largest contributor"}};
  for (const auto& step : steps) rows.push_back(row_of(step));
  std::string text =
      "\nForecast, 95 % (efficiency as expected in the stair file; noise and drift of the bench come on "
      "top)\n" +
      table_of(rows) + actions_text(steps);
  std::string remarks;
  for (const auto& check : forecast["bench_checks"]) remarks += "  " + check.get<std::string>() + "\n";
  for (const auto& remark : forecast["remarks"])
    remarks += "  every step: " + remark.get<std::string>() + "\n";
  remarks += why_text(steps);
  return text + (remarks.empty() ? "" : "\nTo the forecast\n" + remarks);
}

}  // namespace loadstair::command
