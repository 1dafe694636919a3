#include "analysis/base/number.h"
#include "daemon/setup/reading.h"
#include "daemon/setup/stair_parts.h"

namespace loadstair::setup {
namespace {

using document::ObjectReader;
using document::print_text;
using document::Type;

struct Level {
  std::string label;
  double load_w = 0.0;
};

struct Plan {
  std::string control, setting, input_control;
  std::vector<double> input_voltages_v;  ///< empty: the input is left as it is
  std::vector<Level> levels;
};

void read_levels(ObjectReader& reader, const Ratings& ratings, Plan& plan) {
  if (reader.has("levels_percent") == reader.has("levels_w")) {
    reader.problem().report(
        reader.has("levels_w") ? reader.place_of("levels_w") : reader.place(),
        "a staircase has \"levels_percent\" (of the rated power) or \"levels_w\", one of the two");
    return;
  }
  // Twice the rating: far enough for the search of a fold-back, near enough to catch a slip.
  for (const double percent : reader.numbers_or_empty("levels_percent", {0.0, 200.0})) {
    plan.levels.push_back({base::print_number(percent) + " %", ratings.output_power_w * percent / 100.0});
  }
  for (const double load_w : reader.numbers_or_empty("levels_w", {0.0, 2.0 * ratings.output_power_w})) {
    plan.levels.push_back({base::print_number(load_w) + " W", load_w});
  }
  if (plan.levels.empty()) {
    reader.complain(reader.has("levels_w") ? "levels_w" : "levels_percent", "the list of levels is empty");
  }
}

// What the control is set to for a load: itself, or what gives it at the rated output voltage.
std::optional<double> set_value(const Plan& plan, const Ratings& ratings, double load_w) {
  const double voltage_v = ratings.output_voltage_v;
  if (plan.setting == "power") return load_w;
  if (plan.setting == "current") return load_w / voltage_v;
  if (load_w > 0.0) return voltage_v * voltage_v / load_w;
  return std::nullopt;
}

void read_plan(ObjectReader& reader, const Stair& stair, Plan& plan) {
  const bool by_hand = !reader.has("control");
  if (by_hand && !reader.has("prompt")) {
    reader.problem().report(reader.place(),
                            "a staircase needs a \"control\" with its \"setting\", or a \"prompt\" for "
                            "the person who sets the load");
    return;
  }
  if (!by_hand) {
    plan.control = reader.text("control", "\"control\": \"load\"");
    plan.setting = reader.text("setting", "\"setting\": \"power\"");
    if (!reader.problem().found() && plan.setting != "power" && plan.setting != "current" &&
        plan.setting != "resistance") {
      reader.complain("setting", "\"setting\" is " + print_text(plan.setting) +
                                     "; a load level can be set as power, current or resistance");
    }
  } else if (reader.has("setting")) {
    reader.complain("setting",
                    "a \"setting\" without its \"control\"; add, for example, \"control\": \"load\"");
  }
  read_levels(reader, stair.ratings, plan);
  plan.input_voltages_v = reader.numbers_or_empty("input_voltages_v", document::kPositive);
  plan.input_control = reader.text_or("input_control", "");
  if (reader.has("input_voltages_v") != reader.has("input_control")) {
    reader.complain(reader.has("input_control") ? "input_control" : "input_voltages_v",
                    "\"input_voltages_v\" and \"input_control\" (the control that sets them) go together");
  }
}

std::string voltage_label(double voltage_v) {
  return " at " + base::print_number(voltage_v) + " V";
}

// "Set the lamps to {load_w} W." with the figures of this step.
std::string fill_in(std::string text, const Level& level) {
  const auto replace = [&](std::string_view what, const std::string& with) {
    for (auto at = text.find(what); at != std::string::npos; at = text.find(what, at + with.size())) {
      text.replace(at, what.size(), with);
    }
  };
  replace("{load_w}", base::print_number(level.load_w));
  replace("{level}", level.label);
  return text;
}

void add_step(ObjectReader& reader, const Plan& plan, const Level& level, std::optional<double> input_v,
              const Step& model, Stair& stair) {
  Step step = model;
  step.label = unique_label(level.label + (input_v ? voltage_label(*input_v) : ""), stair.steps);
  step.load_w = level.load_w;
  step.prompt = fill_in(model.prompt, level);
  step.hand_action = fill_in(model.hand_action, level);
  step.input_voltage_v = input_v;
  if (input_v) step.set.push_back({plan.input_control, "voltage", *input_v});
  if (!plan.control.empty()) {
    const auto value = set_value(plan, stair.ratings, level.load_w);
    if (!value) {
      reader.complain("setting",
                      "a load of 0 W has no resistance; set it as power or current, or leave the level out");
      return;
    }
    step.set.push_back({plan.control, plan.setting, *value});
  }
  stair.steps.push_back(std::move(step));
}

}  // namespace

std::string unique_label(const std::string& wanted, const std::vector<Step>& steps) {
  const auto taken = [&](const std::string& label) {
    return std::any_of(steps.begin(), steps.end(), [&](const Step& step) { return step.label == label; });
  };
  std::string label = wanted;
  for (int n = 2; taken(label); ++n) label = wanted + " (" + base::print_integer(n) + ")";
  return label;
}

void read_staircase(ObjectReader& reader, Stair& stair) {
  Plan plan;
  read_plan(reader, stair, plan);
  Step model;
  model.written_at = "staircase";
  read_conduct(reader, model);
  if (reader.problem().found()) return;
  std::vector<std::optional<double>> inputs{plan.input_voltages_v.begin(), plan.input_voltages_v.end()};
  if (inputs.empty()) inputs.emplace_back();
  constexpr std::size_t kMostSteps = 2000;
  if (inputs.size() * plan.levels.size() > kMostSteps) {
    reader.problem().report(reader.place(), "this staircase has more than 2000 steps; shorten its lists");
    return;
  }
  for (const auto& input_v : inputs) {
    for (const Level& level : plan.levels) add_step(reader, plan, level, input_v, model, stair);
  }
}

}  // namespace loadstair::setup
