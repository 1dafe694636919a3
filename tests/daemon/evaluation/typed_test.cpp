// Channels that a person reads and types.
#include <catch2/catch.hpp>

#include "analysis/base/number.h"
#include "hand_bench.h"

using namespace loadstair;
using namespace loadstair::evaluation;
using namespace loadstair::evaluation_tests;

namespace {

constexpr double kNormal95 = 1.959963984540054;

/// All four channels typed, exact meters but for what is asked.
HandBench typed_bench(Meter meter) {
  HandBench bench;
  bench.hookup.channels.reserve(16);
  bench.type("input voltage", setup::Quantity::voltage, "V", meter);
  bench.type("input current", setup::Quantity::current, "A", meter);
  bench.type("output voltage", setup::Quantity::voltage, "V", meter);
  bench.type("output current", setup::Quantity::current, "A", meter);
  setup::Port& input = bench.port("input", setup::Direction::input);
  input.voltage = "input voltage";
  input.current = "input current";
  setup::Port& output = bench.port("output", setup::Direction::output);
  output.voltage = "output voltage";
  output.current = "output current";
  bench.step("40 W", 40.0);
  return bench;
}

}  // namespace

TEST_CASE("a run of typed channels alone has an efficiency") {
  HandBench bench = typed_bench({.reading_percent = 0.5, .resolution = 0.01});
  const char* names[] = {"input voltage", "input current", "output voltage", "output current"};
  const double values[] = {48.0, 0.83, 12.0, 3.21};
  for (int round = 1; round <= 2; ++round) {
    for (int i = 0; i < 4; ++i) {
      // Second round in reverse: every channel's two instants lie around the window's middle.
      bench.type_round(names[i], 0, round, values[i], round == 1 ? 1.0 + i : 9.0 - i, 0.01);
    }
  }
  const StepResult step = bench.evaluate().steps.at(0);
  CHECK(step.result_state == "measured");
  CHECK(step.efficiency.value == Approx(12.0 * 3.21 / (48.0 * 0.83)).epsilon(1e-12));
  // Gains of 0.5 % and resolutions of 0.01, q / sqrt 12 (JCGM 100:2008 F.2.2.1).
  double variance = 0.0;
  for (const double value : values) {
    const double gain = 0.005 / std::sqrt(3.0);
    const double resolution = 0.01 / std::sqrt(12.0) / value;
    variance += gain * gain + resolution * resolution;
  }
  REQUIRE(step.efficiency.expanded);
  CHECK(*step.efficiency.expanded ==
        Approx(kNormal95 * std::sqrt(variance) * step.efficiency.value).epsilon(1e-9));
}

TEST_CASE(
    "what lies between two rounds is a bound, with the slope times what is not known of their instants") {
  HandBench bench = typed_bench({.reading_percent = 0.0});
  for (int round = 1; round <= 2; ++round) {
    const double at_s = round == 1 ? 1.0 : 9.0;
    bench.type_round("input voltage", 0, round, round == 1 ? 47.9 : 48.1, at_s, 1e-9);
    bench.type_round("input current", 0, round, 1.0, at_s, 1e-9);
    bench.type_round("output voltage", 0, round, 12.0, at_s, 1e-9);
    bench.type_round("output current", 0, round, 3.0, at_s, 1e-9);
  }
  const Quantity power = bench.evaluate().steps.at(0).input_power;
  CHECK(power.value == Approx(48.0));
  // Half of 0.2 V, and 0.2 V / 8 s times the half-width of 0.5 s.
  const double half_width = 0.1 + 0.2 / 8.0 * 0.5;
  CHECK(*power.expanded == Approx(kNormal95 * half_width / std::sqrt(3.0)).epsilon(1e-6));
}

TEST_CASE("a corrected answer counts, the one before it does not") {
  HandBench bench = typed_bench({});
  for (int round = 1; round <= 2; ++round) {
    for (const char* name : {"input voltage", "input current", "output voltage", "output current"}) {
      bench.type_round(name, 0, round, 99.0, 1.0, 0.1);
      bench.run.typed.back().flags |= instrument::kSuperseded;
      bench.type_round(name, 0, round, 2.0, 2.0, 0.1);
    }
  }
  CHECK(bench.evaluate().steps.at(0).input_power.value == Approx(4.0));
}

TEST_CASE("a digit typed coarser than the meter's own is a source") {
  HandBench fine = typed_bench({.reading_percent = 0.0, .resolution = 0.1});
  HandBench coarse = fine;
  for (int round = 1; round <= 2; ++round) {
    for (const char* name : {"input voltage", "input current", "output voltage", "output current"}) {
      fine.type_round(name, 0, round, 100.0, 5.0, 0.1);
      coarse.type_round(name, 0, round, 100.0, 5.0, std::string{name} == "input voltage" ? 1.0 : 0.1);
    }
  }
  const double u_fine = *fine.evaluate().steps.at(0).input_power.expanded / kNormal95;
  const double u_coarse = *coarse.evaluate().steps.at(0).input_power.expanded / kNormal95;
  CHECK(u_coarse * u_coarse - u_fine * u_fine == Approx(100.0 * 100.0 * 1.0 / 12.0).epsilon(1e-6));
}

TEST_CASE("one round only, or none") {
  HandBench bench = typed_bench({});
  for (const char* name : {"input voltage", "input current", "output voltage"}) {
    bench.type_round(name, 0, 1, 2.0, 5.0, 0.1);
  }
  const StepResult step = bench.evaluate().steps.at(0);
  CHECK(step.result_state == "missing channel output current: nothing was typed in this step");
  CHECK(step.input_power.known);
  CHECK(*step.input_power.expanded > kNormal95 * 2.0 * 0.1 / std::sqrt(3.0));
}

namespace {

/// Remarks of a typed step that hold this text.
int remarks_with(const StepResult& step, const std::string& text) {
  int count = 0;
  for (const std::string& remark : step.remarks) count += remark.find(text) == std::string::npos ? 0 : 1;
  return count;
}

HandBench typed_twice(double second_input_a, double rated_w) {
  HandBench bench = typed_bench({.reading_percent = 0.5, .resolution = 0.001});
  bench.stair.ratings.output_power_w = rated_w;
  for (int round = 1; round <= 2; ++round) {
    const double at_s = round == 1 ? 1.0 : 9.0;
    bench.type_round("input voltage", 0, round, 48.0, at_s, 0.001);
    bench.type_round("input current", 0, round, round == 1 ? 0.83 : second_input_a, at_s, 0.001);
    bench.type_round("output voltage", 0, round, 12.0, at_s, 0.001);
    bench.type_round("output current", 0, round, 3.2, at_s, 0.001);
  }
  return bench;
}

}  // namespace

TEST_CASE("rounds that lie apart by more than the meter explains are told of") {
  // u of the meter is 0.5 % / sqrt 3 of 0.83 A: 2.4 mA; half of what lies between is 2 and 3 mA.
  CHECK(remarks_with(typed_twice(0.834, 40.0).evaluate().steps.at(0), "its rounds differ by") == 0);
  CHECK(remarks_with(typed_twice(0.836, 40.0).evaluate().steps.at(0),
                     "input current: its rounds differ by 0.006") == 1);
}

TEST_CASE("a typed input below a tenth of the load may hide bursts") {
  // 38.4 W out: 9.6 % of 400 W, 10.1 % of 380 W.
  CHECK(remarks_with(typed_twice(0.83, 380.0).evaluate().steps.at(0), "bursts") == 0);
  CHECK(remarks_with(typed_twice(0.83, 400.0).evaluate().steps.at(0), "input current: typed") == 1);
}

TEST_CASE("typed and linked channels mix in one port") {
  HandBench bench = stoat_bench({.reading_percent = 0.0});
  bench.hookup.channels[0].typed = true;
  bench.hookup.channels[0].instrument.clear();
  bench.hookup.channels[0].value.clear();
  bench.stored("input voltage") = store::StoredChannel{.entry = bench.stored("input voltage").entry};
  bench.type_round("input voltage", 0, 1, 47.95, 2.0, 1e-9);
  bench.type_round("input voltage", 0, 2, 48.05, 8.0, 1e-9);
  const StepResult step = bench.evaluate().steps.at(0);
  CHECK(step.result_state == "measured");
  CHECK(step.input_power.value == Approx(39.9));
  const double half_width = (0.05 + 0.1 / 6.0 * 0.5) * 39.9 / 48.0;
  CHECK(*step.input_power.expanded == Approx(kNormal95 * half_width / std::sqrt(3.0)).epsilon(1e-6));
}
