// Decisions against closed forms: the guard band of four known meters, a table on a capture of known
// harmonics.
#include "daemon/evaluation/decisions.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <numbers>
#include <string>

#include "analysis/base/number.h"
#include "hand_bench.h"

using namespace loadstair;
using namespace loadstair::evaluation;
using namespace loadstair::evaluation_tests;

namespace {

using Catch::Matchers::Contains;

constexpr double kNormal95 = 1.959963984540054;

double normal_below(double x) {
  return std::erfc(-x / std::numbers::sqrt2) / 2.0;
}

/// Shares of the fundamental; order 15 is beyond its 0.5 %, total sqrt(16 + 9 + 0.64) = 5.06 %.
constexpr double kFifth = 0.04, kSeventh = 0.03, kFifteenth = 0.008;

std::string capture_file() {
  std::string text = "time (s),output voltage (V)\n";
  constexpr int kPerCycle = 400;
  for (int k = 0; k < 10 * kPerCycle; ++k) {
    const double x = 2.0 * std::numbers::pi * k / kPerCycle;
    const double v = 325.0 * (std::sin(x) + kFifth * std::sin(5.0 * x) + kSeventh * std::sin(7.0 * x + 1.0) +
                              kFifteenth * std::sin(15.0 * x));
    text += base::print_number(k * 0.02 / kPerCycle) + "," + base::print_number(v) + "\n";
  }
  return text;
}

/// One level of an inverter with a capture of its output's voltage.
HandBench captured_bench(const std::string& table) {
  HandBench bench;
  bench.stair.ratings = {385.0, 230.0, 600.0, 50.0, 45.0};
  bench.hookup.channels.reserve(4);
  bench.link("output power", setup::Quantity::power, "W", {.reading_percent = 0.1, .upto = 1500.0});
  setup::Port& output = bench.port("output", setup::Direction::output, setup::PortKind::ac);
  output.power = "output power";
  const int step = bench.step("300 W", 300.0);
  bench.read_window("output power", step, 300.0);
  setup::CaptureSource source;
  source.instrument = "scope";
  source.voltage_column = "output voltage";
  source.voltage_gain_percent = 1.0;
  source.voltage_linearity_percent = 0.1;
  source.port = "output";
  bench.hookup.captures.push_back(source);
  store::StoredCapture capture;
  capture.step = step;
  capture.instrument = "scope";
  capture.file_name = "step.csv";
  capture.t_ns = kStart + 15 * kSecond;
  capture.bytes = capture_file();
  capture.size = static_cast<std::int64_t>(capture.bytes.size());
  bench.run.captures.push_back(std::move(capture));
  bench.stair.limits = {{"waveform", "", "", std::nullopt, std::nullopt, {}, table}};
  return bench;
}

const DecisionResult& of(const RunResult& result, const std::string& ending) {
  for (const DecisionResult& decision : result.decisions) {
    if (decision.quantity.ends_with(ending)) return decision;
  }
  throw std::logic_error{"no decision on " + ending};
}

}  // namespace

TEST_CASE("the guard band is the expanded uncertainty of the efficiency, in the limit's per cent") {
  // Four meters of 0.1 % of the reading, rectangular: u = eta 0.001 sqrt(4/3), JCGM 100:2008 5.1.6.
  HandBench bench = stoat_bench({.reading_percent = 0.1});
  const double percent = 100.0 * 38.5 / 39.9;
  const double expanded = kNormal95 * percent * 0.001 * std::sqrt(4.0 / 3.0);
  const auto decided = [&](double low, double factor) {
    bench.stair.limits = {{"efficiency", "efficiency", "%", low, std::nullopt, {}, ""}};
    bench.stair.guard_factor = factor;
    const RunResult result = bench.evaluate();
    REQUIRE(result.decisions.size() == 1);
    return result.decisions[0];
  };
  // JCGM 106:2012 8.3.2: acceptance begins r U above a lower limit. 5 % stand for the interval's own shape.
  CHECK(decided(percent - 1.05 * expanded, 1.0).decision == "pass");
  CHECK(decided(percent - 0.90 * expanded, 1.0).decision == "undecided");
  CHECK(decided(percent + 0.90 * expanded, 1.0).decision == "undecided");
  CHECK(decided(percent + 1.05 * expanded, 1.0).decision == "fail");
  CHECK(decided(percent - 1.05 * expanded, 2.0).decision == "undecided");
  CHECK(decided(percent - 2.10 * expanded, 2.0).decision == "pass");
  // JCGM 106:2012 7: the probability of a normal quantity above the limit.
  CHECK(decided(percent - 0.5 * expanded, 1.0).probability.value_or(-1.0) ==
        Approx(normal_below(0.5 * kNormal95)).margin(0.01));
  // Without a guard band the value alone decides.
  CHECK(decided(percent - 0.1 * expanded, 0.0).decision == "pass");
  CHECK(decided(percent + 0.1 * expanded, 0.0).decision == "fail");
  CHECK_THAT(bench.evaluate().decision_rule, Contains("simple acceptance"));
}

TEST_CASE("a limit names the levels that it holds for") {
  HandBench bench = stoat_bench({.reading_percent = 0.1});
  const int second = bench.step("80 W", 80.0);
  bench.read_window("input voltage", second, 48.0);
  bench.read_window("input current", second, 82.0 / 48.0);
  bench.read_window("output voltage", second, 12.0);
  bench.read_window("output current", second, 80.0 / 12.0);
  bench.stair.limits = {{"all", "loss", "W", std::nullopt, 10.0, {}, ""},
                        {"one", "loss", "W", std::nullopt, 0.5, {"80 W"}, ""}};
  const RunResult result = bench.evaluate();
  REQUIRE(result.decisions.size() == 3);
  CHECK(result.decisions[0].step == "40 W");
  CHECK(result.decisions[0].decision == "pass");
  CHECK(result.decisions[1].step == "80 W");
  CHECK(result.decisions[2].step == "80 W");
  CHECK(result.decisions[2].decision == "fail");
}

TEST_CASE("a table is held against the distortion of a capture; a short record is indicative") {
  const RunResult result = captured_bench("en50160_low_voltage").evaluate();
  const DecisionResult& total = of(result, "total distortion");
  INFO(total.text);
  // EN 50160 allows 8 %, from weekly values: 0.2 s decide nothing.
  REQUIRE(total.value.known);
  CHECK(total.value.value == Approx(100.0 * std::hypot(kFifth, kSeventh, kFifteenth)).epsilon(1e-3));
  CHECK(total.high.value_or(0.0) == 8.0);
  CHECK(total.decision == "indicative");
  CHECK(total.probability.value_or(0.0) > 0.999);
  CHECK_THAT(total.text, Contains("pass") && Contains("indicative: recorded"));

  const DecisionResult& lines = of(result, "harmonics");
  INFO(lines.text);
  CHECK(lines.decision == "not decided");
  // 4 of 6 %, 3 of 5 %, 0.8 of 0.5 %: EN 50160, table 1.
  CHECK_THAT(lines.text, Contains("1 lie above") && Contains("order 15") && Contains("0.500 %"));
}

TEST_CASE("rows from memory decide nothing, and what cannot be compared says so") {
  // No current was captured, and the table's unit is one of a demand that nobody declared.
  const RunResult demand = captured_bench("ieee519_current").evaluate();
  REQUIRE_FALSE(demand.decisions.empty());
  for (const DecisionResult& decision : demand.decisions) CHECK(decision.decision == "not decided");

  HandBench bench = captured_bench("ieee519_current");
  bench.hookup.captures[0].current_column = "output voltage";
  const DecisionResult lines = of(bench.evaluate(), "harmonics");
  CHECK(lines.decision == "not decided");
  CHECK_THAT(lines.text, Contains("no line was compared"));
}

TEST_CASE("an unknown table is refused by naming the known ones") {
  const RunResult result = captured_bench("en50160_high_seas").evaluate();
  REQUIRE(result.decisions.size() == 1);
  CHECK(result.decisions[0].decision == "not decided");
  CHECK_THAT(result.decisions[0].text, Contains("en50160_high_seas") && Contains("en50160_low_voltage, ") &&
                                           Contains("iec62040_3_class_s"));
}
