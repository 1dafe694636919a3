#include <algorithm>

#include "analysis/base/number.h"
#include "daemon/setup/explain.h"

namespace loadstair::setup {
namespace {

std::string number(double value) {
  return base::print_number(value);
}
// Six digits at most, without trailing zeros.
std::string short_number(double value) {
  return number(base::parse_number(base::print_significant(value, 6)).value_or(value));
}
std::string count(std::size_t n, const std::string& what) {
  return base::print_integer(static_cast<std::int64_t>(n)) + " " + what + (n == 1 ? "" : "s");
}
std::string join(const std::vector<std::string>& names) {
  std::string line;
  for (const std::string& name : names) line += (line.empty() ? "" : ", ") + name;
  return line;
}

// A sentence within a line.
std::string without_stop(std::string text) {
  if (text.ends_with('.')) text.pop_back();
  return text;
}

// " W", as the control's profile says; empty where nothing says it.
std::string unit_of(const SetPoint& point, const Hookup* hookup) {
  if (hookup == nullptr) return "";
  for (const Control& control : hookup->controls) {
    const Instrument* instrument =
        control.name == point.control ? hookup->find_instrument(control.instrument) : nullptr;
    if (instrument == nullptr) continue;
    for (const auto& setting : instrument->profile.settings) {
      if (setting.name == point.setting && !setting.unit.empty()) return " " + setting.unit;
    }
  }
  return "";
}

// What is on, where that is not simply everything.
std::string describe_power(const Step& step) {
  switch (step.kind) {
    case StepKind::zero:
      return "everything off";
    case StepKind::tie:
      return step.on.empty() ? "everything off" : "only " + join(step.on) + " on";
    case StepKind::standby:
      return step.on.empty() ? "only sources on" : "only " + join(step.on) + " on";
    case StepKind::no_load:
      return step.on.empty() ? "all but loads on" : "only " + join(step.on) + " on";
    case StepKind::level:
    case StepKind::closure:
      break;
  }
  return short_number(step.load_w) + " W";
}

std::string describe(const Step& step, const Hookup* hookup) {
  std::string line = step.label + ": ";
  if (!step.rewire.empty())
    line += "with everything off and discharged, by hand: " + without_stop(step.rewire) + "; ";
  line += describe_power(step);
  for (const SetPoint& point : step.set) {
    line +=
        ", " + point.control + " " + point.setting + " " + short_number(point.value) + unit_of(point, hookup);
  }
  if (!step.prompt.empty()) line += ", by hand: " + without_stop(step.prompt);
  line += "; soak " + number(step.soak_s) + " s";
  if (step.electrical || step.thermal) line += ", settle at most " + number(step.settle_limit_s) + " s";
  line += ", average " + number(step.average_s) + " s";
  return step.capture ? line + ", capture" : line;
}

std::size_t levels_of(const Stair& stair, std::size_t tie) {
  return static_cast<std::size_t>(
      std::count_if(stair.steps.begin(), stair.steps.end(),
                    [&](const Step& step) { return step.kind == StepKind::tie && step.check == tie; }));
}

void explain_checks(const Stair& stair, std::vector<std::string>& lines) {
  if (!stair.zero_channels.empty()) {
    lines.push_back("zeros are measured and taken off: " + join(stair.zero_channels));
  }
  for (std::size_t i = 0; i < stair.ties.size(); ++i) {
    const Tie& tie = stair.ties[i];
    lines.push_back("tie " + tie.name + ": " + join({tie.channels.begin() + 1, tie.channels.end()}) +
                    " against " + tie.channels.front() + " at " + count(levels_of(stair, i), "level") +
                    "; the measured ratio takes the place of their specifications");
  }
  for (const Step& step : stair.steps) {
    if (step.kind != StepKind::closure || step.check >= stair.steps.size()) continue;
    lines.push_back(step.label + " is compared with " + stair.steps[step.check].label +
                    ": the drift of the bench within the run");
  }
}

std::string describe(const Limit& limit) {
  std::string line = "limit " + limit.name + ": ";
  if (!limit.table.empty()) {
    line += "table " + limit.table;
  } else {
    const std::string unit = limit.unit == "1" ? "" : " " + limit.unit;
    line += limit.quantity;
    if (limit.low) line += " at least " + number(*limit.low) + unit;
    if (limit.low && limit.high) line += " and";
    if (limit.high) line += " at most " + number(*limit.high) + unit;
  }
  return limit.at.empty() ? line : line + ", at " + join(limit.at);
}

void explain_limits(const Stair& stair, std::vector<std::string>& lines) {
  for (const Limit& limit : stair.limits) lines.push_back(describe(limit));
  if (stair.limits.empty()) return;
  if (stair.guard_factor == 0.0) {
    lines.emplace_back(
        "limits are decided by the value alone (simple acceptance): near a limit it may be wrong");
  } else {
    lines.push_back("limits are decided with a guard band of " + number(stair.guard_factor) +
                    " times the expanded uncertainty; what lies within it is undecided");
  }
}

std::string describe(const Overload& overload) {
  return "overload circuit: expected to trip at " + short_number(overload.threshold_v / overload.sense_ohm) +
         " A " + overload.sense + ", " + number(overload.threshold_v) + " V over " +
         number(overload.sense_ohm) + " ohm";
}

}  // namespace

std::vector<std::string> explain(const Stair& stair, const Hookup* hookup) {
  std::vector<std::string> lines = {
      "prototype " + stair.prototype.name +
      (stair.prototype.revision.empty() ? "" : " revision " + stair.prototype.revision) +
      (stair.prototype.unit.empty() ? "" : ", unit " + stair.prototype.unit) + ": " +
      count(stair.steps.size(), "step") + ", expected efficiency " +
      number(stair.ratings.expected_efficiency_percent) + " %"};
  double most_s = stair.end.cool_down_s + stair.end.discharge_s;
  for (const Step& step : stair.steps) {
    lines.push_back(describe(step, hookup));
    most_s += step.soak_s + step.settle_limit_s + step.average_s;
  }
  explain_checks(stair, lines);
  if (stair.overload) lines.push_back(describe(*stair.overload));
  explain_limits(stair, lines);
  lines.push_back("at most " + base::print_fixed(most_s / 60.0, 1) + " min, without prompts");
  return lines;
}

}  // namespace loadstair::setup
