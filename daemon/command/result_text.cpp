#include "daemon/command/result_text.h"

#include <algorithm>
#include <cmath>
#include <nlohmann/json.hpp>
#include <vector>

#include "analysis/base/number.h"
#include "daemon/command/figures_text.h"
#include "daemon/command/text_table.h"

namespace loadstair::command {
namespace {

using nlohmann::json;

/// Places after the point that show `uncertainty` with two significant digits.
int decimals_for(double uncertainty) {
  if (!(uncertainty > 0.0)) return 3;
  return std::clamp(1 - static_cast<int>(std::floor(std::log10(uncertainty))), 0, 9);
}

std::string indicated_or_dash(const json& quantity, double scale) {
  if (quantity["value"].is_number()) {
    return (quantity.value("at_least", false) ? "\u2265" : "") + estimate_text(quantity, scale);
  }
  if (quantity.contains("indicated")) {
    return (quantity.value("at_least", false) ? "\u2265" : "") +
           base::print_significant(quantity["indicated"].get<double>() * scale, 4) + " (?)";
  }
  return "-";
}

std::string temperature_text(const json& step) {
  std::string text;
  for (const auto& temperature : step["temperatures"]) {
    if (!text.empty()) text += "; ";
    text += estimate_text(temperature["end"]);
    if (temperature["how"].is_string()) text += " " + temperature["how"].get<std::string>();
  }
  return text.empty() ? "-" : text;
}

std::string settled_text(const json& settled) {
  const std::string by = settled["by"];
  if (by.empty()) return "-";
  if (by == "no criterion") return "not asked for";
  if (!settled["settled"].get<bool>()) return "NO";
  std::string text = "yes, by " + by;
  if (settled["after_s"].is_number())
    text += " (" + base::print_fixed(settled["after_s"].get<double>(), 1) + " s)";
  return text;
}

Row power_row(const json& step) {
  return {step["label"].get<std::string>(),         base::print_significant(step["load_w"].get<double>(), 4),
          estimate_text(step["input_power"]),       estimate_text(step["output_power"]),
          estimate_text(step["efficiency"], 100.0), estimate_text(step["loss"])};
}

Row quality_row(const json& step) {
  return {step["label"].get<std::string>(),
          indicated_or_dash(step["power_factor"], 1.0),
          indicated_or_dash(step["thd_voltage"], 100.0),
          indicated_or_dash(step["crest_factor"], 1.0),
          temperature_text(step),
          settled_text(step["settled"])};
}

/// Notes with the steps they belong to: one that several steps share is said once.
class Notes {
 public:
  void add(const std::string& step, const std::string& note) {
    for (auto& [text, steps] : notes_) {
      if (text != note) continue;
      if (steps.back() != step) steps.push_back(step);
      return;
    }
    notes_.push_back({note, {step}});
  }

  [[nodiscard]] std::string text(std::size_t all_steps) const {
    std::string text;
    for (const auto& [note, steps] : notes_) {
      std::string where = "all steps";
      if (steps.size() < all_steps || all_steps == 1) {
        where.clear();
        for (const auto& step : steps) where += (where.empty() ? "" : ", ") + step;
      }
      text += "  " + where + ": " + note + "\n";
    }
    return text;
  }

 private:
  std::vector<std::pair<std::string, std::vector<std::string>>> notes_;
};

/// Checks of the bench, no load and standby are not expected to have one.
bool measures_efficiency(const json& step) {
  const std::string kind = step.value("kind", std::string{"level"});
  return kind == "level" || kind == "closure";
}

/// Why a step has no efficiency, and what is remarkable about it.
void note_step(const json& step, Notes& notes) {
  const std::string label = step["label"];
  if (!step["efficiency"]["value"].is_number() && measures_efficiency(step)) {
    notes.add(label, "no efficiency: " + step["efficiency"].value("why", std::string{"no reason known"}));
  }
  for (const auto& remark : step["remarks"]) notes.add(label, remark);
  if (step["budget"].empty()) return;
  const auto& largest = step["budget"].front();
  const std::string action = largest["action"];
  notes.add(label, "most of the uncertainty: " + largest["source"].get<std::string>() + ", " +
                       base::print_fixed(largest["share"].get<double>() * 100.0, 0) + " % of the variance" +
                       (action.empty() ? "" : "; " + action));
}

}  // namespace

std::string estimate_text(const json& estimate, double scale) {
  if (!estimate.contains("value") || !estimate["value"].is_number()) return "-";
  const double value = estimate["value"].get<double>() * scale;
  if (estimate.contains("expanded")) {
    const double expanded = estimate["expanded"].get<double>() * scale;
    const int decimals = decimals_for(expanded);
    return base::print_fixed(value, decimals) + " \u00b1" + base::print_fixed(expanded, decimals);
  }
  const double low = estimate["low"].get<double>() * scale;
  const double high = estimate["high"].get<double>() * scale;
  const int decimals = decimals_for((high - low) / 2.0);
  return base::print_fixed(value, decimals) + " (" + base::print_fixed(low, decimals) + " to " +
         base::print_fixed(high, decimals) + ")";
}

std::string result_table(const json& result) {
  const auto& prototype = result["prototype"];
  std::string text = prototype["name"].get<std::string>() + " revision " +
                     prototype["revision"].get<std::string>() + ", unit " +
                     prototype["unit"].get<std::string>() + ", run " +
                     base::print_integer(result["run"].get<std::int64_t>()) + ", " +
                     result["state"].get<std::string>() + ". Intervals: 95 %.\n\n";
  std::vector<Row> powers = {{"step", "load W", "input W", "output W", "efficiency %", "loss W"}};
  std::vector<Row> qualities = {{"step", "PF", "THD %", "crest", "end temperature \u00b0C", "settled"}};
  Notes notes;
  for (const auto& step : result["steps"]) {
    powers.push_back(power_row(step));
    qualities.push_back(quality_row(step));
    note_step(step, notes);
  }
  const std::string table = table_of(powers) + "\n" + table_of(qualities);
  text += table;
  if (table.find("(?)") != std::string::npos) text += "\n(?): indicated, uncertainty not known\n";
  text += figures_text(result);
  std::string remarks = notes.text(result["steps"].size());
  for (const auto& remark : result["remarks"]) remarks += "  " + remark.get<std::string>() + "\n";
  if (!remarks.empty()) text += "\nNotes\n" + remarks;
  return text;
}

}  // namespace loadstair::command
