#include "daemon/command/figures_text.h"

#include <algorithm>
#include <nlohmann/json.hpp>
#include <vector>

#include "analysis/base/number.h"
#include "daemon/command/result_text.h"
#include "daemon/command/text_table.h"

namespace loadstair::command {
namespace {

using nlohmann::json;

bool known(const json& estimate) {
  return estimate.contains("value") && estimate["value"].is_number();
}

/// A figure with its unit, or why there is none.
std::string figure_or_why(const json& estimate, double scale, const std::string& unit) {
  if (known(estimate)) return estimate_text(estimate, scale) + (unit.empty() ? "" : " " + unit);
  return "none, " + estimate.value("why", std::string{"no reason known"});
}

std::string section(const std::string& head, const std::string& lines) {
  return lines.empty() ? "" : "\n" + head + "\n" + lines;
}

std::string weighted_text(const json& figure) {
  const std::string title = figure["title"];
  const auto& efficiency = figure["efficiency"];
  if (efficiency["value"].is_number()) return "  " + title + ": " + estimate_text(efficiency, 100.0) + " %\n";
  std::string why = efficiency.value("why", std::string{});
  if (why.starts_with(title + ": ")) why.erase(0, title.size() + 2);
  return "  " + title + ": none, " + why + "\n";
}

std::string weighted_section(const json& result) {
  std::string lines;
  for (const auto& figure : result["weighted"]) {
    // A bench without an AC output has no such figure, and nobody expects one.
    const std::string why = figure["efficiency"].value("why", std::string{});
    if (why.find("no AC output") != std::string::npos) continue;
    lines += weighted_text(figure);
  }
  return section("Weighted, conversion only (tracking is not included)", lines);
}

std::string model_section(const json& result) {
  std::string lines;
  for (const auto& model : result.value("models", json::array())) {
    const std::string span = model["span"];
    lines += "  " + span + ": lack of fit " + model["lack_of_fit"].get<std::string>() +
             (model["used"].get<bool>() ? "" : "; its figures are not quoted") + "\n";
    if (!model["used"].get<bool>()) continue;
    lines += "    p0 " + figure_or_why(model["p0"], 1.0, "W") + ", p1 " +
             figure_or_why(model["p1"], 1000.0, "mW/W") + ", p2 " +
             figure_or_why(model["p2"], 1e6, "\u00b5W/W\u00b2") + "\n";
    lines += "    peak " + figure_or_why(model["peak_efficiency"], 100.0, "%") + " at " +
             figure_or_why(model["peak_power"], 1.0, "W") + "\n";
  }
  return section("Loss over output power P: p0 + p1 P + p2 P\u00b2", lines);
}

std::string other_figures(const json& result) {
  struct Line {
    const char *key, *title, *unit;
    double scale;
  };
  constexpr Line kLines[] = {{"no_load", "no-load input power", "W", 1.0},
                             {"standby", "standby power", "W", 1.0},
                             {"load_regulation", "load regulation", "%", 100.0},
                             {"line_regulation", "line regulation", "%", 100.0}};
  std::string lines;
  for (const auto& line : kLines) {
    const auto found = result.find(line.key);
    if (found == result.end() || !known(*found)) continue;
    lines += std::string{"  "} + line.title + ": " + figure_or_why(*found, line.scale, line.unit) + "\n";
  }
  if (const auto found = result.find("fold_back"); found != result.end()) {
    lines += "  fold-back: " + (*found)["text"].get<std::string>() + "\n";
  }
  if (const auto found = result.find("start_up"); found != result.end()) {
    lines += "  start-up: " + (*found)["text"].get<std::string>() + "\n";
  }
  return section("Other figures", lines);
}

/// Loss and efficiency where the heatsink ends, beside what was measured on the way; steps where that is the
/// same to the printed digits are named together.
std::string projected_section(const json& result) {
  std::vector<Row> rows = {
      {"step", "loss W measured", "at end temperature", "efficiency % measured", "at end temperature"}};
  std::string same;
  for (const auto& step : result["steps"]) {
    if (!step.contains("loss_projected")) continue;
    const std::string label = step["label"];
    const Row row = {
        label, estimate_text(step["loss"]), estimate_text(step["loss_projected"]),
        estimate_text(step["efficiency"], 100.0),
        step.contains("efficiency_projected") ? estimate_text(step["efficiency_projected"], 100.0) : "-"};
    if (row[1] == row[2] && row[3] == row[4]) {
      same += (same.empty() ? "" : ", ") + label;
    } else {
      rows.push_back(row);
    }
  }
  std::string text = rows.size() == 1 ? std::string{} : table_of(rows);
  if (!same.empty()) text += "  as measured, to the printed digits: " + same + "\n";
  return section("Projected to the end temperature", text);
}

std::string thermal_section(const json& result) {
  std::vector<Row> rows = {{"step", "place", "K/W to ambient", "\u00b0C at highest ambient"}};
  std::string hold_out;
  for (const auto& step : result["steps"]) {
    for (const auto& temperature : step["temperatures"]) {
      if (temperature.contains("hold_out"))
        hold_out += "  " + step["label"].get<std::string>() + ", " + temperature["place"].get<std::string>() +
                    ": " + temperature["hold_out"]["text"].get<std::string>() + "\n";
      const auto of = [&](const char* key) {
        const auto found = temperature.find(key);
        return found == temperature.end() ? std::string{"-"} : estimate_text(*found);
      };
      if (of("thermal_resistance") == "-" && of("at_highest_ambient") == "-") continue;
      rows.push_back({step["label"].get<std::string>(), temperature["place"].get<std::string>(),
                      of("thermal_resistance"), of("at_highest_ambient")});
    }
  }
  const std::string table = rows.size() == 1 ? std::string{} : table_of(rows);
  return section("Thermal", table + hold_out);
}

std::string checks_section(const json& result) {
  std::string lines;
  for (const auto& check : result.value("bench_checks", json::array()))
    lines += "  " + check["text"].get<std::string>() + "\n";
  for (const auto& closure : result.value("closure", json::array()))
    lines += "  " + closure["text"].get<std::string>() + "\n";
  return section("Checks of the bench", lines);
}

std::string decisions_section(const json& result) {
  std::string lines;
  for (const auto& decision : result.value("decisions", json::array())) {
    const std::string word = decision["decision"];
    const std::string text = decision["text"];
    lines += "  " + (text.find(word) == std::string::npos ? word + ": " : std::string{}) + text + "\n";
  }
  const std::string rule = result.value("decision_rule", std::string{});
  return section("Decisions" + (rule.empty() ? "" : " (" + rule + ")"), lines);
}

/// Below this share of the variance a line is only counted.
constexpr double kShownShare = 0.0005;

std::string lines_of_budget(const json& budget, double scale, const std::string& unit) {
  std::vector<Row> rows = {
      {"source", "type", "u " + unit, "share of variance", "what would shrink it", "U then " + unit}};
  std::int64_t small = 0;
  double small_share = 0.0;
  for (const auto& entry : budget) {
    const double share = entry["share"].get<double>();
    if (share < kShownShare) {
      ++small;
      small_share += share;
      continue;
    }
    rows.push_back({entry["source"].get<std::string>(), entry["type"].get<std::string>(),
                    base::print_significant(entry["standard_uncertainty"].get<double>() * scale, 2),
                    base::print_fixed(share * 100.0, 1) + " %", entry["action"].get<std::string>(),
                    entry.contains("expanded_if_done")
                        ? base::print_significant(entry["expanded_if_done"].get<double>() * scale, 2)
                        : std::string{}});
  }
  std::string text = table_of(rows);
  if (small > 0) {
    text += "  and " + base::print_integer(small) + " more, together " +
            base::print_significant(small_share * 100.0, 1) +
            " % of the variance (all of them with --json)\n";
  }
  return text;
}

}  // namespace

std::string figures_text(const json& result) {
  return weighted_section(result) + model_section(result) + other_figures(result) +
         projected_section(result) + thermal_section(result) + checks_section(result) +
         decisions_section(result);
}

std::string budget_text(const json& step) {
  const std::string label = step["label"];
  std::string text;
  if (step["budget"].empty()) {
    text += "Efficiency at " + label + ": " + figure_or_why(step["efficiency"], 100.0, "%") + "\n";
  } else {
    text += "Efficiency at " + label + ": " + estimate_text(step["efficiency"], 100.0) + " %\n" +
            lines_of_budget(step["budget"], 100.0, "points");
  }
  if (const auto found = step.find("validation"); found != step.end())
    text += "  " + (*found)["text"].get<std::string>() + "\n";
  if (!step["loss_budget"].empty()) {
    text += "\nLoss at " + label + ": " + estimate_text(step["loss"]) + " W\n" +
            lines_of_budget(step["loss_budget"], 1.0, "W");
  }
  return text;
}

bool limit_failed(const json& result) {
  const auto found = result.find("decisions");
  if (found == result.end()) return false;
  return std::any_of(found->begin(), found->end(),
                     [](const json& decision) { return decision["decision"] == "fail"; });
}

}  // namespace loadstair::command
