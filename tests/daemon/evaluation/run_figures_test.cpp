// Figures of a run, on benches written by hand.
#include "daemon/evaluation/run_figures.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <string>

#include "hand_bench.h"

namespace {

using namespace loadstair;
using namespace loadstair::evaluation_tests;
using Catch::Contains;

/// A 48 V to 12 V bench without steps: 0.5 % of reading, and a hundredth of that on the range.
HandBench empty_bench() {
  HandBench bench;
  bench.hookup.channels.reserve(16);
  const Meter meter{0.5, 0.005, 100.0};
  bench.link("input voltage", setup::Quantity::voltage, "V", meter);
  bench.link("input current", setup::Quantity::current, "A", meter);
  bench.link("output voltage", setup::Quantity::voltage, "V", meter);
  bench.link("output current", setup::Quantity::current, "A", meter);
  setup::Port& input = bench.port("input", setup::Direction::input);
  input.voltage = "input voltage";
  input.current = "input current";
  setup::Port& output = bench.port("output", setup::Direction::output);
  output.voltage = "output voltage";
  output.current = "output current";
  return bench;
}

/// A step with so much at the output, and the input power that an efficiency of `efficiency` takes.
int add_step(HandBench& bench, const std::string& label, double volts, double amperes,
             double efficiency = 0.95, double input_v = 48.0) {
  const double power_w = volts * amperes;
  const int step = bench.step(label, std::round(power_w));
  bench.read_window("input voltage", step, input_v);
  bench.read_window("input current", step, power_w / efficiency / input_v);
  bench.read_window("output voltage", step, volts);
  bench.read_window("output current", step, amperes);
  return step;
}

setup::Step& plan(HandBench& bench, int step) {
  return bench.stair.steps.at(static_cast<std::size_t>(step));
}

/// 12.1 V behind 0.01 ohm, constant current from 15 A on: points as loads of 6 .. 22 A would draw them.
HandBench folding_bench() {
  HandBench bench = empty_bench();
  for (const double wanted_a : {6.0, 9.0, 12.0, 14.0}) {
    add_step(bench, base::print_number(wanted_a) + " A", 12.1 - 0.01 * wanted_a, wanted_a);
  }
  for (const double wanted_a : {17.0, 20.0, 22.0}) {
    const double ohm = 12.1 / wanted_a - 0.01;
    add_step(bench, base::print_number(wanted_a) + " A", 15.0 * ohm, 15.0);
  }
  return bench;
}

void add_capture(HandBench& bench, int step, const std::string& bytes) {
  setup::CaptureSource source;
  source.instrument = "scope";
  source.voltage_column = "output voltage";
  source.port = "output";
  bench.hookup.captures = {source};
  store::StoredCapture capture;
  capture.step = step;
  capture.instrument = "scope";
  capture.file_name = "start.csv";
  capture.t_ns = kStart + step * kStepLength + 15 * kSecond;
  capture.bytes = bytes;
  capture.size = static_cast<std::int64_t>(bytes.size());
  bench.run.captures.push_back(capture);
}

}  // namespace

TEST_CASE("a run without such steps says which are not asked for") {
  const auto result = stoat_bench().evaluate();
  CHECK_FALSE(result.no_load.known);
  CHECK(result.no_load.why == "the stair file asks for no no-load step");
  CHECK(result.standby.why == "the stair file asks for no standby step");
  CHECK(result.load_regulation.why == "fewer than two different loads were measured");
  CHECK(result.line_regulation.why == "fewer than two different input voltages were measured");
  CHECK_FALSE(result.fold_back);
  CHECK_FALSE(result.start_up);
  CHECK(result.closure.empty());
}

TEST_CASE("idle powers are the input powers of their steps, with a word on the meters") {
  HandBench bench = empty_bench();
  const int standby = add_step(bench, "standby", 0.0, 0.0);
  bench.stored("input current").value.assign(kReadings, 0.010);
  plan(bench, standby).kind = setup::StepKind::standby;
  add_step(bench, "120 W", 12.0, 10.0);
  const auto result = bench.evaluate();
  REQUIRE(result.standby.known);
  CHECK(result.standby.value == Approx(0.48).epsilon(1e-9));
  CHECK(result.standby.low < 0.48);
  bool told = false;
  for (const std::string& remark : result.remarks) {
    told = told || (remark.find("standby: input current: read at 0.01") == 0);
  }
  CHECK(told);
}

TEST_CASE("load and line regulation from the levels; overload is no full load") {
  HandBench bench = empty_bench();
  add_step(bench, "24 W", 12.06, 2.0);
  add_step(bench, "120 W", 12.03, 10.0);
  add_step(bench, "240 W", 11.94, 20.0);
  add_step(bench, "300 W", 11.0, 27.0);
  const int low = add_step(bench, "120 W at 36 V", 12.015, 10.0, 0.95, 36.0);
  const int high = add_step(bench, "120 W at 60 V", 12.039, 10.0, 0.95, 60.0);
  plan(bench, low).input_voltage_v = 36.0;
  plan(bench, high).input_voltage_v = 60.0;
  const auto result = bench.evaluate();
  REQUIRE(result.load_regulation.known);
  CHECK(result.load_regulation.value == Approx(0.12 / 12).epsilon(1e-6));
  // One voltmeter on one range: without its gain, an uncertainty of 0.5 % of 12 V at either end would be some
  // 0.8 points; what is left is its parts per level, a tenth of the variance.
  CHECK(result.load_regulation.expanded.value_or(1) < 0.004);
  REQUIRE(result.line_regulation.known);
  CHECK(result.line_regulation.value == Approx(0.024 / 12).epsilon(1e-6));
}

TEST_CASE("the knee is found from the levels and held against the declared circuit") {
  HandBench bench = folding_bench();
  auto found = bench.evaluate().fold_back;
  REQUIRE(found);  // the output folds: told, whatever the stair file declares
  REQUIRE(found->knee_current.known);
  CHECK(found->knee_current.value == Approx(15.0).epsilon(0.01));
  CHECK(found->knee_power.value == Approx(15.0 * 11.95).epsilon(0.01));
  CHECK(found->expected_current.why == "the stair file declares no overload circuit");
  bench.stair.overload = setup::Overload{"average", 0.15, 0.01, 2.0, 1.0};
  found = bench.evaluate().fold_back;
  REQUIRE(found);
  CHECK(found->expected_current.value == Approx(15.0));
  CHECK(found->sense == "average");
  CHECK_THAT(found->text, Contains("they agree"));
  bench.stair.overload->threshold_v = 0.19;
  found = bench.evaluate().fold_back;
  REQUIRE(found);
  CHECK_THAT(found->text, Contains("they differ by -4"));
  bench.stair.overload->threshold_tolerance_percent.reset();
  CHECK_THAT(bench.evaluate().fold_back->text, Contains("not all tolerances"));
}

TEST_CASE("an overload circuit that was never reached is told of") {
  HandBench bench = empty_bench();
  for (const double amperes : {2.0, 5.0, 10.0, 15.0, 20.0})
    add_step(bench, base::print_number(amperes) + " A", 12.0 - 0.002 * amperes, amperes);
  CHECK_FALSE(bench.evaluate().fold_back);
  bench.stair.overload = setup::Overload{"rms", 0.25, 0.01, 2.0, 1.0};
  const auto found = bench.evaluate().fold_back;
  REQUIRE(found);
  CHECK_FALSE(found->knee_current.known);
  CHECK_THAT(found->text, Contains("no fold-back within the span (up to 20"));
  CHECK_THAT(found->text, Contains("expected trip 25"));
}

TEST_CASE("a capture that shows a start gives a rise time; one that does not gives nothing") {
  HandBench bench = stoat_bench();
  std::string ramp = "time (s),output voltage (V)\n";
  std::string steady = ramp;
  for (int i = 0; i < 2000; ++i) {
    const double t = i * 1e-4;
    const double v = std::min(12.0, std::max(0.0, (t - 0.02) / 0.05 * 12.0));
    ramp += base::print_number(t) + "," + base::print_number(v) + "\n";
    steady += base::print_number(t) + "," + base::print_number(12.0 + 1e-3 * (i % 7)) + "\n";
  }
  add_capture(bench, 0, steady);
  CHECK_FALSE(bench.evaluate().start_up);
  add_capture(bench, 0, "no record at all");
  CHECK_FALSE(bench.evaluate().start_up);
  add_capture(bench, 0, ramp);
  const auto found = bench.evaluate().start_up;
  REQUIRE(found);
  REQUIRE(found->rise_time.known);
  CHECK(found->rise_time.value == Approx(0.04).epsilon(1e-3));
  CHECK(found->overshoot.value == Approx(0.0).margin(1e-9));
  CHECK(found->monotonic);
  CHECK_THAT(found->text, Contains("start.csv"));
}

TEST_CASE("closure: a level again, against what noise and parts per level allow") {
  for (const double change : {0.0002, 0.02}) {
    HandBench bench = empty_bench();
    add_step(bench, "60 W", 12.0, 5.0, 0.93);
    const int first = add_step(bench, "120 W", 12.0, 10.0, 0.95);
    add_step(bench, "240 W", 12.0, 20.0, 0.94);
    const int again = add_step(bench, "120 W again", 12.0, 10.0, 0.95 - change);
    plan(bench, again).kind = setup::StepKind::closure;
    plan(bench, again).check = static_cast<std::size_t>(first);
    const auto result = bench.evaluate();
    REQUIRE(result.closure.size() == 1);
    const auto& closure = result.closure[0];
    CAPTURE(closure.text);
    REQUIRE(closure.difference.known);
    CHECK(closure.difference.value == Approx(-change).epsilon(1e-6));
    // Four meters, twice, a tenth of the variance of 0.5 % rectangular each, on 0.95.
    const double expected = 1.96 * 0.95 * std::sqrt(8 * 0.1) * 0.005 / std::sqrt(3.0);
    CHECK(closure.allowed == Approx(expected).epsilon(0.05));
    CHECK(closure.held == (change < closure.allowed));
    CHECK_THAT(closure.text, Contains("120 W again: closure"));
    CHECK(result.curve.size() == 3);
  }
}

TEST_CASE("figures of a run: nothing is NaN where readings are missing or absurd") {
  HandBench bench = folding_bench();
  bench.stair.overload = setup::Overload{"peak", 0.0, 0.0, {}, {}};
  bench.stair.ratings.output_voltage_v = 0.0;
  for (double& value : bench.stored("output voltage").value) value = value < 11.0 ? 0.0 : -1e300;
  const auto result = bench.evaluate();
  for (const auto* quantity :
       {&result.no_load, &result.standby, &result.load_regulation, &result.line_regulation}) {
    CHECK_FALSE(quantity->known);
    CHECK_FALSE(quantity->why.empty());
  }
  REQUIRE(result.fold_back);
  CHECK_FALSE(result.fold_back->knee_current.known);
  CHECK_FALSE(result.fold_back->text.empty());
}
