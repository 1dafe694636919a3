// Forecasts, the Monte Carlo validation of efficiencies, and decisions on limits.
#include "daemon/evaluation/forecast.h"

#include <catch2/catch.hpp>
#include <cmath>

#include "hand_bench.h"

using namespace loadstair;
using namespace loadstair::evaluation;
using namespace loadstair::evaluation_tests;

namespace {

constexpr double kNormal95 = 1.959963984540054;

bool mentions(const std::vector<std::string>& texts, const std::string& text) {
  for (const std::string& one : texts) {
    if (one.find(text) != std::string::npos) return true;
  }
  return false;
}

double half_width(const Quantity& quantity) {
  return (quantity.high - quantity.low) / 2.0;
}

/// The Stoat's bench with a stair of three levels, nothing recorded.
HandBench planned(Meter meter = {}) {
  HandBench bench = stoat_bench(meter);
  bench.stair.steps.clear();
  for (const double load_w : {24.0, 120.0, 240.0}) {
    setup::Step step;
    step.label = base::print_number(load_w) + " W";
    step.load_w = load_w;
    step.average_s = 30.0;
    bench.stair.steps.push_back(step);
  }
  bench.stair.ratings.expected_efficiency_percent = 94.0;
  return bench;
}

}  // namespace

TEST_CASE("a forecast has the plan's powers, the expected efficiency and the specifications' uncertainty") {
  const HandBench bench = planned({.reading_percent = 0.1});
  const Forecast found = forecast(bench.hookup, bench.stair);
  REQUIRE(found.steps.size() == 3);
  const double loads[] = {24.0, 120.0, 240.0};
  for (std::size_t i = 0; i < 3; ++i) {
    const ForecastStep& step = found.steps[i];
    INFO(step.label);
    CHECK(step.output_power.value == Approx(loads[i]).epsilon(1e-9));
    CHECK(step.input_power.value == Approx(loads[i] / 0.94).epsilon(1e-9));
    CHECK(step.efficiency.value == Approx(0.94).epsilon(1e-6));
    // Four meters of 0.1 %, rectangular.
    const double u = 0.94 * 0.001 * std::sqrt(4.0 / 3.0);
    CHECK(half_width(step.efficiency) == Approx(kNormal95 * u).epsilon(0.05));
    REQUIRE_FALSE(step.budget.empty());
    REQUIRE(step.best);
    CHECK(step.best->action.find("tie check") != std::string::npos);
    CHECK(step.best->expanded_if_done < kNormal95 * u);
  }
}

TEST_CASE("a forecast and the result of a run on that bench agree") {
  HandBench bench = stoat_bench({.reading_percent = 0.2, .range_percent = 0.01, .upto = 60.0});
  const StepResult measured = bench.evaluate().steps.at(0);
  bench.stair.steps[0].load_w = 38.5;
  bench.stair.steps[0].average_s = 30.0;
  bench.stair.ratings.expected_efficiency_percent = 100.0 * 38.5 / 39.9;
  const Forecast found = forecast(bench.hookup, bench.stair);
  REQUIRE(found.steps.size() == 1);
  CHECK(found.steps[0].efficiency.value == Approx(measured.efficiency.value).epsilon(1e-9));
  CHECK(half_width(found.steps[0].efficiency) == Approx(half_width(measured.efficiency)).epsilon(0.01));
  CHECK(half_width(found.steps[0].loss) == Approx(half_width(measured.loss)).epsilon(0.01));
}

TEST_CASE("corrections for burden do not move a forecast from its plan") {
  HandBench bench = planned({.reading_percent = 0.1});
  bench.hookup.ports[1].sensed = false;
  bench.hookup.ports[1].lead_resistance_ohm = 0.01;
  const Forecast found = forecast(bench.hookup, bench.stair);
  // 20 A through 10 mohm are 4 W of 240.
  CHECK(found.steps.at(2).output_power.value == Approx(240.0).epsilon(2e-4));
  CHECK(found.steps.at(2).efficiency.value == Approx(0.94).epsilon(2e-4));
}

TEST_CASE("a forecast says why there is no efficiency") {
  HandBench bench = planned();
  bench.hookup.ports[1].kind = setup::PortKind::ac;
  bench.stair.ratings.output_frequency_hz = 50.0;
  for (const std::size_t i : {std::size_t{2}, std::size_t{3}})
    bench.hookup.channels[i].response = setup::Response::true_rms_ac;
  Forecast found = forecast(bench.hookup, bench.stair);
  CHECK(found.steps.at(0).result_state == "apparent power only");
  CHECK_FALSE(found.steps.at(0).efficiency.known);
  // A capture of the output, its errors declared, gives the power.
  setup::Instrument scope;
  scope.name = "scope";
  bench.hookup.instruments.push_back(scope);
  setup::CaptureSource source;
  source.instrument = "scope";
  source.port = "output";
  source.voltage_column = "v";
  source.current_column = "3";
  source.voltage_gain_percent = source.current_gain_percent = 1.0;
  source.delay_tolerance_s = 1e-7;
  bench.hookup.captures.push_back(source);
  bench.stair.steps[1].capture = true;
  found = forecast(bench.hookup, bench.stair);
  CHECK_FALSE(found.steps.at(0).efficiency.known);
  INFO(found.steps.at(1).efficiency.why);
  REQUIRE(found.steps.at(1).efficiency.known);
  CHECK(found.steps.at(1).efficiency.value == Approx(0.94).epsilon(2e-3));
  bench.hookup.channels[0].ranges.clear();
  found = forecast(bench.hookup, planned().stair);
  CHECK_FALSE(found.steps.at(0).efficiency.known);
}

TEST_CASE("a forecast counts with zeros and ties, and leaves idle steps without an efficiency") {
  // 48 V at both ends: the tied meters read about the same, so that a tie serves them.
  HandBench bench = planned({.reading_percent = 0.5});
  bench.stair.ratings.output_voltage_v = 48.0;
  const double untied = half_width(forecast(bench.hookup, bench.stair).steps.at(2).efficiency);
  bench.stair.ties = {{"ammeters", {"input current", "output current"}},
                      {"voltmeters", {"input voltage", "output voltage"}}};
  std::vector<setup::Step> steps;
  for (std::size_t check = 0; check < 2; ++check) {
    for (const char* level : {"low", "high"}) {
      setup::Step step;
      step.label = "tie " + bench.stair.ties[check].name + ", " + level;
      step.kind = setup::StepKind::tie;
      step.check = check;
      step.average_s = 30.0;
      steps.push_back(step);
    }
  }
  setup::Step idle;
  idle.label = "no load";
  idle.kind = setup::StepKind::no_load;
  idle.average_s = 30.0;
  steps.push_back(idle);
  bench.stair.steps.insert(bench.stair.steps.begin(), steps.begin(), steps.end());
  const Forecast found = forecast(bench.hookup, bench.stair);
  REQUIRE(found.steps.size() == 4);
  CHECK(found.steps[0].kind == "no load");
  CHECK_FALSE(found.steps[0].efficiency.known);
  // Half of the rated loss (common practice, no source).
  CHECK(found.steps[0].input_power.value == Approx(240.0 * (1.0 / 0.94 - 1.0) / 2.0).epsilon(1e-6));
  CHECK(found.bench_checks.size() == 2);
  INFO(found.bench_checks[0]);
  CHECK(half_width(found.steps[3].efficiency) < 0.75 * untied);
}

TEST_CASE("where one rectangular error rules, its own interval is reported and not the linear one") {
  // Only the input's amperes are uncertain, rectangular within a = 0.16 % of the reading, but for two tenths
  // of the variance that are sources of their own. The shortest 95 % interval of a rectangle is 0.95 a to
  // each side, the linear one 1.13 a (JCGM 101:2008 9.2.3).
  HandBench bench = stoat_bench({.reading_percent = 0.0});
  bench.hookup.channels[1].ranges[0].reading_percent = 0.16;
  const StepResult step = bench.evaluate().steps.at(0);
  REQUIRE(step.validation);
  INFO(step.validation->text);
  CHECK_FALSE(step.validation->agrees);
  CHECK(step.efficiency.method == "monte-carlo");
  CHECK_FALSE(step.efficiency.k);
  CHECK_FALSE(step.efficiency.expanded);
  const double a = 0.0016 * 38.5 / 39.9;
  CHECK(half_width(step.efficiency) < 1.08 * a);
  CHECK(half_width(step.efficiency) > 0.95 * a);
  // The curve quotes the same figure with the same interval.
  const RunResult result = bench.evaluate();
  CHECK(result.curve.at(0).efficiency.low == result.steps.at(0).efficiency.low);
}

TEST_CASE("where many errors come together Monte Carlo bears the linear interval out") {
  HandBench bench = stoat_bench({.reading_percent = 0.3, .range_percent = 0.2, .upto = 60.0});
  const StepResult step = bench.evaluate().steps.at(0);
  REQUIRE(step.validation);
  INFO(step.validation->text);
  CHECK(step.validation->draws >= 10000);
  CHECK(step.validation->agrees == (step.efficiency.method == "linear"));
  CHECK(step.validation->tolerance > 0.0);
}

TEST_CASE("limits are decided by guarded acceptance, each with its probability") {
  HandBench bench = stoat_bench({.reading_percent = 0.1});
  const StepResult step = bench.evaluate().steps.at(0);
  const double percent = 100.0 * step.efficiency.value;
  const double above = 100.0 * (step.efficiency.high - step.efficiency.value);
  const auto decided = [&](double low) {
    bench.stair.limits = {{"efficiency", "efficiency", "%", low, std::nullopt, {}, ""}};
    const RunResult result = bench.evaluate();
    REQUIRE(result.decisions.size() == 1);
    CHECK(result.decision_rule.find("guarded acceptance") != std::string::npos);
    CHECK(result.decisions[0].step == "40 W");
    return result.decisions[0];
  };
  CHECK(decided(percent - 1.5 * above).decision == "pass");
  CHECK(decided(percent).decision == "undecided");
  CHECK(decided(percent).probability.value_or(0.0) == Approx(0.5).margin(0.01));
  CHECK(decided(percent - 0.5 * above).decision == "undecided");
  CHECK(decided(percent + 1.5 * above).decision == "fail");
  CHECK(decided(percent + 1.5 * above).probability.value_or(1.0) < 0.01);
}

TEST_CASE("a figure without a known uncertainty decides nothing, nor does one that is missing") {
  HandBench bench = stoat_bench();
  bench.hookup.channels[0].ranges.clear();
  bench.stair.limits = {{"efficiency", "efficiency", "%", 50.0, std::nullopt, {}, ""},
                        {"crest", "crest_factor", "1", std::nullopt, 2.0, {"40 W"}, ""},
                        {"idle", "no_load", "W", std::nullopt, 5.0, {}, ""},
                        {"network", "", "", std::nullopt, std::nullopt, {}, "en50160_low_voltage"}};
  const RunResult result = bench.evaluate();
  REQUIRE(result.decisions.size() == 4);
  for (const DecisionResult& decision : result.decisions) {
    INFO(decision.text);
    CHECK(decision.decision == "not decided");
    CHECK_FALSE(decision.text.empty());
  }
  CHECK(mentions({result.decisions[0].text}, "uncertainty not known"));
  CHECK(mentions({result.decisions[3].text}, "no capture"));
}
