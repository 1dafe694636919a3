// How the checks of the bench become steps.
#include <catch2/catch.hpp>
#include <string>

#include "daemon/setup/stair.h"

namespace loadstair::setup {
namespace {

Stair with_checks(const std::string& checks, const std::string& steps = "") {
  const std::string text = R"({"format": 1, "prototype": {"name": "Stoat"},
    "ratings": {"input_voltage_v": 48, "output_voltage_v": 12, "output_power_w": 240},
    "staircase": {"control": "load", "setting": "power", "levels_percent": [10, 50, 100], "average_s": 10},
    )" + (steps.empty() ? "" : "\"steps\": [" + steps + "],") +
                           "\"checks\": {" + checks + "}}";
  auto read = read_stair(text, "f");
  if (!read) FAIL(read.refusal().text());
  return *std::move(read);
}

std::vector<std::string> labels(const Stair& stair) {
  std::vector<std::string> all;
  for (const Step& step : stair.steps) all.push_back(step.label);
  return all;
}

const std::string kZero =
    R"("zero": {"channels": ["v"], "prompt": "Short.", "restore": "Open", "average_s": 5,
                                      "hand_action": "s 1", "restore_action": "s 0")";
const std::string kTies = R"("ties": [
  {"name": "volts", "channels": ["v", "w"], "prompt": "Parallel.", "average_s": 6, "on": ["source"],
   "hand_action": "p 1", "restore_action": "p 0",
   "levels": [{"label": "low", "set": [{"control": "source", "setting": "voltage", "value": 5}]}, {"label": "high"}]},
  {"name": "amps", "channels": ["i", "j"], "prompt": "Series.", "average_s": 7, "levels": [{"label": "only"}]}])";

TEST_CASE("checks stand around the levels in one order, whatever order the file has") {
  const Stair stair = with_checks(R"("closure": {"levels": ["50 %", "10 %"]}, "no_load": {"average_s": 8},
                                     "standby": {"average_s": 9}, )" +
                                      kTies + "," + kZero + "}",
                                  R"({"label": "lamps", "load_w": 60, "prompt": "Lamps.", "average_s": 10})");
  CHECK(labels(stair) == std::vector<std::string>{"zero before", "tie volts, low", "tie volts, high",
                                                  "tie amps, only", "standby", "no load", "10 %", "50 %",
                                                  "100 %", "lamps", "50 % again", "10 % again",
                                                  "zero after"});
  CHECK(stair.zero_channels == std::vector<std::string>{"v"});
  REQUIRE(stair.ties.size() == 2);
  CHECK(stair.ties[1].name == "amps");
  CHECK(stair.ties[1].channels == std::vector<std::string>{"i", "j"});
  // Which tie, and which level is visited again.
  CHECK(stair.steps[1].check == 0);
  CHECK(stair.steps[3].check == 1);
  CHECK(stair.steps[10].check == 7);
  CHECK(stair.steps[stair.steps[11].check].label == "10 %");
  CHECK(stair.steps[11].kind == StepKind::closure);
  CHECK(stair.steps[11].set.at(0).value == 24.0);  // 10 % of 240 W
  CHECK(stair.steps[11].load_w == 24.0);
  CHECK(stair.steps[4].kind == StepKind::standby);
  CHECK(stair.steps[5].load_w == 0.0);
  CHECK(stair.steps[6].kind == StepKind::level);
  CHECK(stair.steps[1].set.at(0).value == 5.0);
  CHECK(stair.steps[2].average_s == 6.0);
  CHECK(stair.steps[1].on == std::vector<std::string>{"source"});
}

TEST_CASE("a rewiring is asked once, and undone at the step that comes next, joined with its own") {
  const Stair stair = with_checks(kZero + "}," + kTies);
  CHECK(stair.steps[0].rewire == "Short.");
  CHECK(stair.steps[0].rewire_action == "s 1");
  CHECK(stair.steps[1].rewire == "Open. Parallel.");  // a full stop where the file had none
  CHECK(stair.steps[1].rewire_action == "s 0; p 1");
  CHECK(stair.steps[2].rewire.empty());
  CHECK(stair.steps[2].rewire_action.empty());
  CHECK(stair.steps[3].rewire == "Connect the bench again as the hook-up file says. Series.");
  CHECK(stair.steps[3].rewire_action == "p 0");
  CHECK(stair.steps[4].label == "10 %");
  CHECK(stair.steps[4].rewire == "Connect the bench again as the hook-up file says.");
  CHECK(stair.steps[4].prompt.empty());
  CHECK(stair.steps[5].rewire.empty());
  CHECK(stair.steps.back().label == "zero after");
  CHECK(stair.steps.back().rewire == "Short. When the run has ended: Open");
  CHECK(stair.steps.back().rewire_action == "s 1");
}

TEST_CASE("a zero may be left out at the end") {
  CHECK(labels(with_checks(kZero + R"(, "after": false})")) ==
        std::vector<std::string>{"zero before", "10 %", "50 %", "100 %"});
}

TEST_CASE("a stair without checks is what it was, and one rule decides its limits") {
  const Stair stair = with_checks("");
  CHECK(labels(stair) == std::vector<std::string>{"10 %", "50 %", "100 %"});
  CHECK(stair.zero_channels.empty());
  CHECK(stair.ties.empty());
  CHECK(stair.limits.empty());
  CHECK_FALSE(stair.overload);
  CHECK(stair.guard_factor == 1.0);
  CHECK(stair.ratings.expected_efficiency_percent == 95.0);
}

TEST_CASE("a level visited twice again has two labels") {
  const auto stair = with_checks(R"("closure": {"levels": ["10 %", "100 %", "10 %"]})");
  CHECK(stair.steps[3].label == "10 % again");
  CHECK(stair.steps[5].label == "10 % again (2)");
  CHECK(stair.steps[5].check == 0);
}

TEST_CASE("which controls are on in which step") {
  Hookup hookup;
  hookup.controls = {
      {"source", "s", "source", {}}, {"converter", "c", "converter", {}}, {"load", "l", "load", {}}};
  const auto on = [&](StepKind kind, std::vector<std::string> named) {
    Step step;
    step.kind = kind;
    step.on = std::move(named);
    return controls_on(step, hookup);
  };
  using Names = std::vector<std::string>;
  CHECK(on(StepKind::zero, {"source"}) == Names{});
  CHECK(on(StepKind::tie, {}) == Names{});
  CHECK(on(StepKind::tie, {"load", "source"}) == Names{"source", "load"});
  CHECK(on(StepKind::standby, {}) == Names{"source"});
  CHECK(on(StepKind::standby, {"source", "load"}) == Names{"source", "load"});
  CHECK(on(StepKind::no_load, {}) == Names{"source", "converter"});
  CHECK(on(StepKind::no_load, {"source"}) == Names{"source"});
  CHECK(on(StepKind::level, {}) == Names{"source", "converter", "load"});
  CHECK(on(StepKind::closure, {}) == Names{"source", "converter", "load"});
}

}  // namespace
}  // namespace loadstair::setup
