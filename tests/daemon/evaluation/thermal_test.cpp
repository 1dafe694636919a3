// What follows from an end temperature, on a bench whose course has a closed form.
#include <catch2/catch.hpp>
#include <cmath>

#include "tests/daemon/evaluation/hand_bench.h"

namespace loadstair::evaluation {
namespace {

using evaluation_tests::HandBench;
using evaluation_tests::kSecond;
using evaluation_tests::kStart;
using evaluation_tests::kStepLength;
using evaluation_tests::Noise;

constexpr double kNormal95 = 1.959963984540054;
constexpr double kOutputW = 38.5;
constexpr double kRoom = 25.0;

struct Course {
  double tau_s = 3.0;
  double loss_w_per_k = 0.02;
  double loss_noise_w = 0.0;
};

double case_c(double t_s, const Course& course) {
  return 60.0 - 35.0 * std::exp(-t_s / course.tau_s);
}

/// Steps of 20 s that are read every 0.1 s from the set point on; the case goes from 25 to 60 degC in each,
/// and the loss is 1.4 W at 60 degC.
HandBench warming_bench(const Course& course, int steps = 1) {
  HandBench bench;
  bench.hookup.channels.reserve(16);
  const evaluation_tests::Meter meter{.reading_percent = 0.02};
  bench.link("input voltage", setup::Quantity::voltage, "V", meter);
  bench.link("input current", setup::Quantity::current, "A", meter);
  bench.link("output voltage", setup::Quantity::voltage, "V", meter);
  bench.link("output current", setup::Quantity::current, "A", meter);
  bench.link("case", setup::Quantity::temperature, "degC", {.reading_percent = 0.5});
  bench.link("room", setup::Quantity::temperature, "degC", {.reading_percent = 1.0});
  setup::Port& input = bench.port("input", setup::Direction::input);
  input.voltage = "input voltage";
  input.current = "input current";
  setup::Port& output = bench.port("output", setup::Direction::output);
  output.voltage = "output voltage";
  output.current = "output current";
  setup::TemperaturePoint point;
  point.place = "middle of the lid";
  point.channel = "case";
  point.ambient_channel = "room";
  bench.hookup.temperatures.push_back(point);
  setup::ThermalSettle settle;
  settle.channel = "case";
  settle.change_k = 1.0;
  settle.window_s = 4.0;
  settle.slowest_tau_s = 2.0 * course.tau_s;
  Noise noise;
  for (int step = 0; step < steps; ++step) {
    bench.step("40 W " + std::to_string(step), 40.0);
    bench.stair.steps.back().thermal = settle;
    for (int k = 0; k < 200; ++k) {
      const std::int64_t t_ns = kStart + step * kStepLength + k * std::int64_t{100'000'000} + 50'000'000;
      const double warm = case_c(0.1 * k + 0.05, course);
      const double loss = 1.4 + course.loss_w_per_k * (warm - 60.0) + course.loss_noise_w * noise.next();
      bench.read("input voltage", t_ns, 48.0);
      bench.read("input current", t_ns, (kOutputW + loss) / 48.0);
      bench.read("output voltage", t_ns, 12.0);
      bench.read("output current", t_ns, kOutputW / 12.0);
      bench.read("case", t_ns, warm + 0.02 * noise.next());
      bench.read("room", t_ns, kRoom + 0.02 * noise.next());
    }
  }
  return bench;
}

double half_width(const Quantity& quantity) {
  return (quantity.high - quantity.low) / 2.0;
}

TEST_CASE("thermal resistance and the case in the hottest room follow from end, ambient and loss") {
  // 1.5 s: in the window, from 10 s on, the case has come to its end within 0.05 K.
  const StepResult step = warming_bench({1.5}).evaluate().steps.at(0);
  REQUIRE(step.temperatures.size() == 1);
  const TemperatureResult& lid = step.temperatures[0];
  REQUIRE(lid.thermal_resistance);
  REQUIRE(lid.at_highest_ambient);
  REQUIRE(lid.thermal_resistance->known);
  CHECK(lid.end.value == Approx(60.0).margin(0.05));
  CHECK(lid.thermal_resistance->unit == "K/W");
  CHECK(lid.thermal_resistance->value == Approx(35.0 / 1.4).epsilon(0.002));
  // 0.5 % of 60, 1 % of 25, rectangular; the loss as the result says (JCGM 100:2008 5.1).
  const double of_end = 60.0 * 0.005 / std::sqrt(3.0);
  const double of_room = kRoom * 0.01 / std::sqrt(3.0);
  const double relative =
      std::hypot(std::hypot(of_end, of_room) / 35.0, half_width(step.loss) / kNormal95 / step.loss.value);
  CHECK(half_width(*lid.thermal_resistance) ==
        Approx(kNormal95 * relative * lid.thermal_resistance->value).epsilon(0.03));
  // 40 degC is the stair's highest ambient.
  CHECK(lid.at_highest_ambient->value == Approx(lid.end.value + 15.0).margin(0.02));
  CHECK(half_width(*lid.at_highest_ambient) == Approx(kNormal95 * std::hypot(of_end, of_room)).epsilon(0.03));
}

TEST_CASE("no ambient, no thermal resistance; no loss, a reason") {
  HandBench bench = warming_bench({});
  SECTION("no ambient channel") {
    bench.hookup.temperatures[0].ambient_channel.clear();
    const TemperatureResult lid = bench.evaluate().steps.at(0).temperatures.at(0);
    CHECK(lid.end.known);
    CHECK_FALSE(lid.thermal_resistance);
    CHECK_FALSE(lid.at_highest_ambient);
  }
  SECTION("a loss that the meters do not tell from zero") {
    for (setup::Channel& channel : bench.hookup.channels) channel.ranges[0].reading_percent = 5.0;
    const TemperatureResult lid = bench.evaluate().steps.at(0).temperatures.at(0);
    REQUIRE(lid.thermal_resistance);
    CHECK_FALSE(lid.thermal_resistance->known);
    CHECK(lid.thermal_resistance->why.find("not told from zero") != std::string::npos);
    CHECK(lid.at_highest_ambient->known);
  }
  SECTION("a thermometer of unknown accuracy") {
    for (setup::Channel& channel : bench.hookup.channels) {
      if (channel.name == "room") channel.ranges.clear();
    }
    const TemperatureResult lid = bench.evaluate().steps.at(0).temperatures.at(0);
    REQUIRE(lid.at_highest_ambient);
    CHECK(lid.at_highest_ambient->known);
    CHECK_FALSE(lid.at_highest_ambient->uncertainty_known);
    CHECK_FALSE(lid.thermal_resistance->uncertainty_known);
  }
}

TEST_CASE("the loss moved to the end temperature, beside the one that was measured") {
  // 8 s: at mid-window, 15 s, 35 exp(-15/8) = 5.4 K are missing; 0.02 W/K.
  const Course course{8.0, 0.02, 0.0};
  const StepResult step = warming_bench(course).evaluate().steps.at(0);
  INFO(step.projection_text);
  REQUIRE(step.loss_projected);
  REQUIRE(step.efficiency_projected);
  REQUIRE(step.loss_projected->known);
  // As measured: the line's value at 15 s lies a little below the curve's.
  CHECK(step.loss.value == Approx(1.4 - 0.02 * 35.0 * std::exp(-15.0 / 8.0)).margin(0.01));
  // The plant's own loss at the end temperature that the result gives.
  const double at_end = 1.4 + 0.02 * (step.temperatures[0].end.value - 60.0);
  CHECK(step.loss_projected->value == Approx(at_end).margin(0.002));
  CHECK(step.loss_projected->value - step.loss.value > 0.05);
  CHECK(step.loss_projected->low <= 1.4);
  CHECK(step.loss_projected->high >= 1.4);
  // The output is held: its power over what the input then is.
  CHECK(step.efficiency_projected->value ==
        Approx(kOutputW / (kOutputW + step.loss_projected->value)).epsilon(1e-6));
  CHECK(step.efficiency_projected->value < step.efficiency.value);
  CHECK(step.projection_text.find("middle of the lid: loss rises by 0.0200") == 0);
}

TEST_CASE("a loss whose slope is lost in noise gets what the slope's interval allows") {
  const StepResult step = warming_bench({8.0, 0.0, 0.3}).evaluate().steps.at(0);
  INFO(step.projection_text);
  REQUIRE(step.loss_projected);
  CHECK(step.projection_text.find("no slope of loss against temperature resolved") != std::string::npos);
  CHECK(half_width(*step.loss_projected) > half_width(step.loss));
  CHECK(step.loss_projected->low <= 1.4);
  CHECK(step.loss_projected->high >= 1.4);
}

TEST_CASE("a typed output says nothing of how the loss goes: no projection, and why") {
  HandBench bench = warming_bench({});
  bench.stored("output current").t_ns.clear();
  HandBench typed = bench;
  for (setup::Channel& channel : typed.hookup.channels) {
    if (channel.name == "output current" || channel.name == "output voltage") {
      channel.typed = true;
      channel.instrument.clear();
    }
  }
  for (const char* name : {"output voltage", "output current"}) {
    store::StoredChannel& stored = typed.stored(name);
    stored = store::StoredChannel{.entry = stored.entry};
  }
  for (const int round : {1, 2}) {
    typed.type_round("output voltage", 0, round, 12.0, 2.0 + 6.0 * (round - 1), 0.001);
    typed.type_round("output current", 0, round, kOutputW / 12.0, 3.0 + 4.0 * (round - 1), 0.001);
  }
  const StepResult step = typed.evaluate().steps.at(0);
  REQUIRE(step.efficiency.known);
  CHECK_FALSE(step.loss_projected);
  CHECK(step.projection_text.find("not read all through the soak") != std::string::npos);
}

TEST_CASE("the last step holds a prediction against its end; earlier steps do not") {
  const RunResult run = warming_bench({2.0, 0.02, 0.0}, 2).evaluate();
  CHECK_FALSE(run.steps.at(0).temperatures.at(0).hold_out);
  const auto& hold_out = run.steps.at(1).temperatures.at(0).hold_out;
  REQUIRE(hold_out);
  INFO(hold_out->text);
  // Twice the constant at least, and before the end.
  CHECK(hold_out->after_s >= 4.0);
  CHECK(hold_out->after_s < 20.0);
  CHECK(hold_out->held);
  CHECK(hold_out->low <= 60.0);
  CHECK(hold_out->high >= 60.0);
  CHECK(hold_out->measured == Approx(60.0).margin(0.1));
  CHECK(hold_out->text.find("would have been accepted") != std::string::npos);
}

}  // namespace
}  // namespace loadstair::evaluation
