#include <catch2/catch.hpp>
#include <string>

#include "daemon/setup/stair.h"

namespace loadstair::setup {
namespace {

Stair with_staircase(const std::string& keys, const std::string& more = "") {
  const std::string text = R"({"format": 1, "prototype": {"name": "Stoat"},
    "ratings": {"input_voltage_v": 48, "output_voltage_v": 12, "output_power_w": 240},
    "staircase": {"average_s": 10, )" +
                           keys + "}" + more + "}";
  auto read = read_stair(text, "f");
  if (!read) FAIL(read.refusal().text());
  return *std::move(read);
}

TEST_CASE("levels in percent are of the rated output power") {
  const Stair stair =
      with_staircase(R"("control": "load", "setting": "power", "levels_percent": [0, 12.5, 100])");
  REQUIRE(stair.steps.size() == 3);
  CHECK(stair.steps[1].label == "12.5 %");
  CHECK(stair.steps[1].load_w == 30.0);
  CHECK(stair.steps[1].set[0].value == 30.0);
  CHECK(stair.steps[1].written_at == "staircase");
}

TEST_CASE("a level set as current or resistance follows from the rated voltage") {
  // 60 W at 12 V: 5 A, 2.4 ohm.
  const Stair current = with_staircase(R"("control": "load", "setting": "current", "levels_w": [60])");
  CHECK(current.steps[0].label == "60 W");
  CHECK(current.steps[0].set[0].value == Approx(5.0));
  const Stair resistance = with_staircase(R"("control": "load", "setting": "resistance", "levels_w": [60])");
  CHECK(resistance.steps[0].set[0].value == Approx(2.4));
}

TEST_CASE("a stair that comes down again has labels of its own") {
  const Stair stair =
      with_staircase(R"("control": "load", "setting": "power", "levels_percent": [10, 50, 100, 50, 10])");
  CHECK(stair.steps[3].label == "50 % (2)");
  CHECK(stair.steps[4].label == "10 % (2)");
}

TEST_CASE("input voltages are the outer loop, set before the load") {
  const Stair stair = with_staircase(
      R"("control": "load", "setting": "power", "levels_percent": [50, 100], "input_voltages_v": [44, 54.5],
         "input_control": "source")");
  REQUIRE(stair.steps.size() == 4);
  CHECK(stair.steps[1].label == "100 % at 44 V");
  CHECK(stair.steps[2].label == "50 % at 54.5 V");
  CHECK(stair.steps[2].input_voltage_v == 54.5);
  CHECK(stair.steps[2].set[0].control == "source");
  CHECK(stair.steps[2].set[0].setting == "voltage");
  CHECK(stair.steps[2].set[1].control == "load");
}

TEST_CASE("a staircase by hand fills its figures into the prompt") {
  const Stair stair = with_staircase(
      R"("prompt": "Set the bank to {load_w} W ({level}).", "hand_action": "bank {load_w}", "levels_percent": [25])");
  CHECK(stair.steps[0].prompt == "Set the bank to 60 W (25 %).");
  CHECK(stair.steps[0].hand_action == "bank 60");
  CHECK(stair.steps[0].set.empty());
}

TEST_CASE("steps written out come after the staircase, and share its settings") {
  const Stair stair = with_staircase(
      R"("control": "load", "setting": "power", "levels_percent": [50], "soak_s": 5, "capture": true,
         "settle": {"thermal": {"channel": "heatsink", "change_k": 1, "window_s": 300, "count": 3, "hold_s": 60},
                    "limit_s": 900})",
      R"(, "steps": [{"label": "lamps", "load_w": 120, "prompt": "Two lamps.", "average_s": 10}])");
  REQUIRE(stair.steps.size() == 2);
  CHECK(stair.steps[0].soak_s == 5.0);
  CHECK(stair.steps[0].capture);
  CHECK(stair.steps[0].thermal->count == 3);
  CHECK_FALSE(stair.steps[0].thermal->by_prediction);
  CHECK(stair.steps[0].settle_limit_s == 900.0);
  CHECK(stair.steps[1].written_at == "steps/0");
}

TEST_CASE("what is left out has the documented default") {
  const Stair stair = with_staircase(R"("control": "load", "setting": "power", "levels_percent": [50])",
                                     R"(, "guards": [{"name": "g", "channel": "c", "above": 1}])");
  CHECK(stair.ratings.output_frequency_hz == 0.0);
  CHECK(stair.ratings.highest_ambient_c == 40.0);
  CHECK(stair.ambient_c == 23.0);
  CHECK(stair.load_tolerance_percent == 2.0);
  CHECK(stair.steps[0].soak_s == 0.0);
  CHECK_FALSE(stair.steps[0].capture);
  CHECK(stair.guards[0].action == GuardAction::stop);
  CHECK(stair.guards[0].missing == MissingAction::stop);
  CHECK(stair.end.discharge_s == 0.0);
}

}  // namespace
}  // namespace loadstair::setup
