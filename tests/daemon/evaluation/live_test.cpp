// Conversion of single readings, and what a step waits for.
#include "daemon/evaluation/live.h"

#include <catch2/catch.hpp>
#include <chrono>
#include <cmath>
#include <limits>
#include <vector>

#include "hand_bench.h"

using namespace loadstair;
using namespace loadstair::evaluation;

namespace {

setup::Channel channel(const std::string& name) {
  setup::Channel made;
  made.name = name;
  return made;
}

struct Series {
  std::vector<double> time_s, value;
  [[nodiscard]] series::TimeSeries view() const { return {time_s, value}; }
};

template <class F>
Series sampled(double from_s, double to_s, double every_s, F value) {
  Series out;
  const int count = static_cast<int>(std::floor((to_s - from_s) / every_s + 1e-9));
  for (int i = 0; i <= count; ++i) {
    const double t = from_s + every_s * i;
    out.time_s.push_back(t);
    out.value.push_back(value(t));
  }
  return out;
}

setup::Step electrical_step() {
  setup::Step step;
  step.electrical = setup::ElectricalSettle{"output power", 2.0, 2.0};
  return step;
}

setup::Step thermal_step() {
  setup::Step step;
  step.thermal = setup::ThermalSettle{};
  step.thermal->channel = "heatsink";
  step.thermal->change_k = 0.4;
  step.thermal->window_s = 1.5;
  step.thermal->count = 2;
  return step;
}

}  // namespace

TEST_CASE("a reading is converted as the hook-up file says") {
  setup::Channel plain = channel("probe");
  plain.conversion.scale = -100.0;
  CHECK(*convert(plain, 2.5) == -250.0);

  setup::Channel shunt = channel("shunt");
  shunt.conversion.shunt = setup::Shunt{0.1, 0.0, 0.0, 0.0};
  CHECK(*convert(shunt, 0.16) == Approx(1.6).epsilon(1e-12));

  // Type K: 4.096 mV at 100 degC against 0 degC (NIST Monograph 175, table of type K).
  setup::Channel couple = channel("heatsink");
  couple.conversion.thermocouple = setup::Thermocouple{'K', 1, "block"};
  CHECK(*convert(couple, 0.004096, 0.0) == Approx(100.0).margin(0.02));
  const auto alone = convert(couple, 0.004096);
  REQUIRE_FALSE(alone.ok());
  CHECK(alone.refusal().text() == "heatsink: no reading of its cold junction, block");
  CHECK_FALSE(convert(couple, 10.0, 25.0).ok());
  // A reader that compensates by itself gives degrees.
  couple.conversion.thermocouple->cold_junction.clear();
  CHECK(*convert(couple, 48.5) == 48.5);
}

TEST_CASE("what must not be used is refused in words, never a number") {
  const setup::Channel volts = channel("input voltage");
  instrument::Reading reading;
  reading.value = 385.0;
  CHECK(*convert(volts, reading) == 385.0);
  reading.flags = instrument::kTyped | instrument::kRangeChanged | instrument::kImplausible;
  CHECK(convert(volts, reading).ok());
  for (const std::uint32_t flag : {instrument::kOverload, instrument::kInvalid, instrument::kStale,
                                   instrument::kUnitChanged, instrument::kSuperseded, instrument::kMissing}) {
    reading.flags = flag;
    const auto refused = convert(volts, reading);
    REQUIRE_FALSE(refused.ok());
    CHECK(refused.refusal().place == "input voltage");
    CHECK_FALSE(refused.refusal().reason.empty());
  }
  CHECK_FALSE(convert(volts, std::numeric_limits<double>::quiet_NaN()).ok());
  CHECK_FALSE(convert(volts, std::numeric_limits<double>::infinity()).ok());
  setup::Channel huge = channel("huge");
  huge.conversion.scale = 1e300;
  CHECK_FALSE(convert(huge, 1e300).ok());
}

TEST_CASE("the floor of a percentage is 1 % of the largest range") {
  setup::Channel power = channel("output power");
  CHECK(electrical_floor(power) == 0.01);
  power.ranges.push_back({.upto = 600.0});
  power.ranges.push_back({.upto = 1500.0});
  CHECK(electrical_floor(power) == Approx(15.0));
  power.conversion.shunt = setup::Shunt{0.1, 0.0, 0.0, 0.0};
  CHECK(electrical_floor(power) == Approx(150.0));
}

TEST_CASE("a step without criteria is settled at once") {
  const WindowState state = live_window(setup::Step{}, LiveTraces{});
  CHECK(state.settled);
  CHECK(state.by == "no criterion");
}

TEST_CASE("the electrical criterion: slope against its limit") {
  const setup::Step step = electrical_step();
  SECTION("no reading") {
    const WindowState state = live_window(step, LiveTraces{});
    CHECK_FALSE(state.settled);
    CHECK(state.text == "waits for output power: no good reading yet");
    CHECK(state.waits_for == "output power");
  }
  SECTION("flat") {
    const Series flat = sampled(0.0, 4.0, 0.2, [](double) { return 300.0; });
    const WindowState state = live_window(step, {.electrical = flat.view(), .electrical_floor = 15.0});
    CHECK(state.settled);
    CHECK(state.by == "slope");
    CHECK(state.remaining_s == 0.0);
  }
  SECTION("6 % a minute where 2 are wanted") {
    const Series rising = sampled(0.0, 4.0, 0.2, [](double t) { return 300.0 + 0.3 * t; });
    const WindowState state = live_window(step, {.electrical = rising.view(), .electrical_floor = 15.0});
    CHECK_FALSE(state.settled);
    CHECK(state.text == "waits for output power: drifts 6.0 %/min over 2.0 s, wanted 2.0 %/min");
  }
  SECTION("a window that is not full yet") {
    const Series young = sampled(0.0, 0.8, 0.2, [](double) { return 300.0; });
    const WindowState state = live_window(step, {.electrical = young.view(), .electrical_floor = 15.0});
    CHECK_FALSE(state.settled);
    CHECK(state.text == "waits for output power: 0.80 s of its 2.0 s window read");
    CHECK(*state.remaining_s == Approx(1.2));
  }
  SECTION("noise that hides the slope is not settled") {
    const Series noisy =
        sampled(0.0, 4.0, 0.2, [](double t) { return 300.0 + 3.0 * std::sin(17.0 * t * t); });
    CHECK_FALSE(live_window(step, {.electrical = noisy.view(), .electrical_floor = 15.0}).settled);
  }
  SECTION("no load at all: the percentage is of the floor") {
    const Series nothing = sampled(0.0, 4.0, 0.2, [](double t) { return 1e-3 * std::sin(9.0 * t); });
    CHECK(live_window(step, {.electrical = nothing.view(), .electrical_floor = 15.0}).settled);
    CHECK_FALSE(live_window(step, {.electrical = nothing.view(), .electrical_floor = 0.0}).settled);
  }
}

TEST_CASE("the thermal criterion by rate, in words that a person can follow") {
  const setup::Step step = thermal_step();
  SECTION("still rising") {
    const Series rising = sampled(0.0, 6.0, 0.25, [](double t) { return 40.0 + 0.8 / 1.5 * t; });
    const WindowState state = live_window(step, {.thermal = rising.view()});
    CHECK_FALSE(state.settled);
    CHECK(state.text == "waits for heatsink: changes 0.80 K in 1.5 s, wanted 0.40 K");
    CHECK(state.waits_for == "heatsink");
  }
  SECTION("flat") {
    const Series flat = sampled(0.0, 6.0, 0.25, [](double) { return 48.5; });
    const WindowState state = live_window(step, {.thermal = flat.view()});
    CHECK(state.settled);
    CHECK(state.by == "rate");
    REQUIRE(state.thermal_end.has_value());
    CHECK(state.thermal_end->value == Approx(48.5));
    CHECK_FALSE(state.thermal_end->predicted);
  }
  SECTION("too little read") {
    const Series young = sampled(0.0, 1.0, 0.25, [](double) { return 40.0; });
    const WindowState state = live_window(step, {.thermal = young.view()});
    CHECK_FALSE(state.settled);
    CHECK(*state.remaining_s == Approx(2.0));
  }
  SECTION("the room warms up: what counts is the rise above it") {
    const Series body = sampled(0.0, 6.0, 0.25, [](double t) { return 48.5 + 0.6 * t; });
    const Series room = sampled(0.1, 5.8, 0.4, [](double t) { return 23.0 + 0.6 * t; });
    CHECK_FALSE(live_window(step, {.thermal = body.view()}).settled);
    CHECK(live_window(step, {.thermal = body.view(), .ambient = room.view()}).settled);
  }
}

TEST_CASE("a prediction ends a step only where the stair file allows it, and never the last one") {
  setup::Step step = thermal_step();
  step.thermal->prediction_tolerance_k = 2.0;
  step.thermal->slowest_tau_s = 1.0;
  step.thermal->change_k = 0.01;
  // One constant of 1 s after 5 s: 99 % of the rise is seen, 0.2 K of 30 K remain.
  const Series rise = sampled(0.0, 5.0, 0.05, [noise = evaluation_tests::Noise{}](double t) mutable {
    return 23.0 + 30.0 * (1.0 - std::exp(-t)) + 0.05 * noise.next();
  });
  const LiveTraces traces{.thermal = rise.view()};
  CHECK_FALSE(live_window(step, traces).settled);
  step.thermal->by_prediction = true;
  const WindowState state = live_window(step, traces);
  INFO(state.text);
  CHECK(state.settled);
  CHECK(state.by == "prediction");
  REQUIRE(state.thermal_end.has_value());
  CHECK(state.thermal_end->predicted);
  CHECK(state.thermal_end->value == Approx(53.0).margin(0.1));
  CHECK_FALSE(live_window(step, traces, true).settled);
}

TEST_CASE("both criteria have to hold; the temperature is told first") {
  setup::Step step = thermal_step();
  step.electrical = electrical_step().electrical;
  const Series flat = sampled(0.0, 6.0, 0.25, [](double) { return 48.5; });
  const Series rising = sampled(0.0, 6.0, 0.25, [](double t) { return 48.5 + t; });
  const auto state = [&](const Series& electrical, const Series& thermal) {
    return live_window(step,
                       {.electrical = electrical.view(), .thermal = thermal.view(), .electrical_floor = 1.0});
  };
  CHECK(state(flat, flat).settled);
  CHECK(state(flat, flat).by == "rate");
  CHECK(state(rising, flat).waits_for == "output power");
  CHECK(state(flat, rising).waits_for == "heatsink");
  CHECK(state(rising, rising).waits_for == "heatsink");
  CHECK(state(rising, flat).thermal_settled);
  CHECK_FALSE(state(rising, flat).electrical_settled);
}
