// Loss models of a run's curve, and the weighted figures that rest on them: inverters of closed form.
#include <catch2/catch.hpp>
#include <cmath>
#include <functional>
#include <string>
#include <vector>

#include "analysis/base/number.h"
#include "hand_bench.h"

using namespace loadstair;
using namespace loadstair::evaluation;
using namespace loadstair::evaluation_tests;

namespace {

constexpr double kP0 = 2.4, kP1 = 0.008, kP2 = 3e-5;
constexpr double kRatedW = 600.0;
constexpr double kRatedV = 385.0;
const std::vector<double> kLevels = {30.0, 60.0, 120.0, 180.0, 300.0, 450.0, 600.0};
const std::vector<double> kCecLevels = {60.0, 120.0, 180.0, 300.0, 450.0, 600.0};

using Loss = std::function<double(double)>;

double parabola(double output_w) {
  return kP0 + output_w * (kP1 + output_w * kP2);
}

/// Good meters on an inverter without steps.
HandBench inverter() {
  HandBench bench;
  bench.hookup.channels.reserve(16);
  bench.stair.ratings = {kRatedV, 230.0, kRatedW, 50.0, 45.0};
  bench.link("input voltage", setup::Quantity::voltage, "V", {.reading_percent = 0.02});
  bench.link("input current", setup::Quantity::current, "A", {.reading_percent = 0.02, .upto = 10.0});
  bench.link("output power", setup::Quantity::power, "W", {.reading_percent = 0.02, .upto = 1500.0});
  bench.hookup.channels.back().response = setup::Response::wattmeter;
  setup::Port& input = bench.port("input", setup::Direction::input);
  input.voltage = "input voltage";
  input.current = "input current";
  setup::Port& output = bench.port("output", setup::Direction::output, setup::PortKind::ac);
  output.power = "output power";
  return bench;
}

void level(HandBench& bench, double load_w, const Loss& loss, double voltage_v = kRatedV) {
  const std::string at = voltage_v == kRatedV ? "" : " at " + base::print_number(voltage_v) + " V";
  const int step = bench.step(base::print_number(load_w) + " W" + at, load_w);
  if (voltage_v != kRatedV) bench.stair.steps.back().input_voltage_v = voltage_v;
  bench.read_window("input voltage", step, voltage_v);
  bench.read_window("input current", step, (load_w + loss(load_w)) / voltage_v);
  bench.read_window("output power", step, load_w);
}

RunResult result_of(const std::vector<double>& loads_w, const Loss& loss) {
  HandBench bench = inverter();
  for (const double load_w : loads_w) level(bench, load_w, loss);
  return bench.evaluate();
}

/// California Energy Commission: 4/5/12/21/53/5 % at 10/20/30/50/75/100 %.
double cec_of(const Loss& loss) {
  const auto eta = [&](double p) { return p / (p + loss(p)); };
  return 0.04 * eta(60) + 0.05 * eta(120) + 0.12 * eta(180) + 0.21 * eta(300) + 0.53 * eta(450) +
         0.05 * eta(600);
}

}  // namespace

TEST_CASE("a run's loss model has its coefficients and a peak in closed form") {
  const RunResult result = result_of(kLevels, parabola);
  REQUIRE(result.models.size() == 1);
  const ModelResult& model = result.models[0];
  CHECK(model.span == "all levels");
  CHECK(model.used);
  CHECK(model.lack_of_fit.find("not significant") == 0);
  CHECK(model.degrees_of_freedom == 4);
  CHECK(model.p0.value == Approx(kP0).epsilon(1e-6));
  CHECK(model.p1.value == Approx(kP1).epsilon(1e-6));
  CHECK(model.p2.value == Approx(kP2).epsilon(1e-6));
  CHECK(model.p2.unit == "1/W");
  // The maximum of P/(P + p0 + p1 P + p2 P^2), by calculus.
  INFO(model.peak_power.why);
  REQUIRE(model.peak_power.known);
  CHECK(model.peak_power.value == Approx(std::sqrt(kP0 / kP2)).epsilon(1e-6));
  CHECK(model.peak_efficiency.value == Approx(1 / (1 + kP1 + 2 * std::sqrt(kP0 * kP2))).epsilon(1e-9));
  for (const Quantity* one : {&model.peak_power, &model.peak_efficiency}) {
    CHECK(one->method == "monte-carlo");
    CHECK_FALSE(one->expanded);
    CHECK_FALSE(one->k);
    CHECK(one->low < one->value);
    CHECK(one->high > one->value);
  }
  // Near the peak the efficiency does not depend on where it is: its interval is about that of the level
  // there, which has a part of its own that the fit averages away.
  const Quantity& near = result.steps.at(4).efficiency;
  const double width = model.peak_efficiency.high - model.peak_efficiency.low;
  CHECK(width < near.high - near.low);
  CHECK(width > 0.5 * (near.high - near.low));
}

TEST_CASE("few levels: a model that is not tested, or none") {
  const RunResult four = result_of({60, 180, 300, 600}, parabola);
  REQUIRE(four.models.size() == 1);
  CHECK(four.models[0].lack_of_fit == "not tested (4 levels)");
  CHECK(four.models[0].used);
  CHECK(four.models[0].p0.known);
  const RunResult two = result_of({300, 600}, parabola);
  REQUIRE(two.models.size() == 1);
  CHECK(two.models[0].lack_of_fit == "not fitted (2 levels)");
  CHECK_FALSE(two.models[0].used);
  for (const Quantity* one : {&two.models[0].p0, &two.models[0].p1, &two.models[0].p2,
                              &two.models[0].peak_power, &two.models[0].peak_efficiency}) {
    CHECK_FALSE(one->known);
    CHECK(one->why.find("three levels") != std::string::npos);
  }
  CHECK(result_of({}, parabola).models.empty());
}

TEST_CASE("a peak outside the measured span is refused with its place") {
  const RunResult high = result_of({360, 400, 450, 500, 600}, parabola);
  REQUIRE(high.models.size() == 1);
  CHECK(high.models[0].used);
  CHECK(high.models[0].p2.known);
  CHECK_FALSE(high.models[0].peak_power.known);
  CHECK(high.models[0].peak_power.why.find("outside the measured") != std::string::npos);
  CHECK_FALSE(high.models[0].peak_efficiency.known);
}

TEST_CASE("a fan that starts makes the fit refuse its figures; levels between come from their neighbours") {
  const Loss fan = [](double p) { return parabola(p) + (p >= 300 ? 4.0 : 0.0); };
  const RunResult result = result_of(kLevels, fan);
  REQUIRE(result.models.size() == 1);
  const ModelResult& model = result.models[0];
  CHECK(model.lack_of_fit.find("significant: chi-squared") == 0);
  CHECK_FALSE(model.used);
  CHECK(model.chi_squared > 9.5);  // 95 % point with four degrees of freedom: 9.488
  for (const Quantity* one : {&model.p0, &model.p1, &model.p2, &model.peak_power, &model.peak_efficiency}) {
    CHECK_FALSE(one->known);
    CHECK(one->why.find("lack of fit") != std::string::npos);
  }
  // Without the 75 % level the CEC figure needs one between 300 and 600 W.
  const RunResult without = result_of({30, 60, 120, 180, 300, 600}, fan);
  REQUIRE(without.weighted.size() == 2);
  const WeightedResult& cec = without.weighted[1];
  INFO(cec.efficiency.why);
  REQUIRE(cec.efficiency.known);
  CHECK(cec.uses.at(4).from.find("between") == 0);
  CHECK(cec.efficiency.low < cec_of(fan));
  CHECK(cec.efficiency.high > cec_of(fan));
}

TEST_CASE("a range change splits the curve: each piece has a model, and neither the other's gain") {
  HandBench bench = inverter();
  // Up to 1 A on the lower range; the upper one reads 0.3 % too much.
  setup::Channel& current = bench.hookup.channels.at(1);
  setup::RangeSpec lower = current.ranges.front();
  lower.upto = 1.0;
  current.ranges.insert(current.ranges.begin(), lower);
  current.ranges.back().reading_percent = 0.5;
  for (const double load_w : {30.0, 60.0, 120.0, 180.0, 300.0, 450.0, 520.0, 600.0}) {
    const bool upper = load_w > 380.0;
    level(bench, load_w, [&](double p) { return upper ? 1.003 * (p + parabola(p)) - p : parabola(p); });
  }
  const RunResult result = bench.evaluate();
  REQUIRE(result.models.size() == 2);
  CHECK(result.models[0].span != result.models[1].span);
  CHECK(result.models[0].span.find("input current") != std::string::npos);
  CHECK(result.models[0].used);
  CHECK(result.models[0].p0.value == Approx(kP0).epsilon(1e-5));
  CHECK(result.models[0].p2.value == Approx(kP2).epsilon(1e-5));
  REQUIRE(result.models[0].peak_power.known);
  CHECK(result.models[0].peak_power.value == Approx(std::sqrt(kP0 / kP2)).epsilon(1e-5));
  // (1.003 (P + L) - P): p0 grows by the gain.
  CHECK(result.models[1].lack_of_fit == "not tested (3 levels)");
  CHECK(result.models[1].p0.value == Approx(1.003 * kP0).epsilon(1e-4));
  CHECK_FALSE(result.models[1].peak_power.known);
  // Every CEC level was measured, whatever its range.
  REQUIRE(result.weighted.at(1).efficiency.known);
  CHECK(result.weighted[1].efficiency.low < cec_of(parabola));
  CHECK(result.weighted[1].efficiency.high > cec_of(parabola));
}

TEST_CASE("CEC over three input voltages is the mean of their figures; fewer are one voltage's") {
  const auto at = [](double voltage_v) {
    return Loss{[=](double p) { return parabola(p) * voltage_v / kRatedV; }};
  };
  HandBench bench = inverter();
  for (const double voltage_v : {350.0, kRatedV, 420.0}) {
    for (const double load_w : kCecLevels) level(bench, load_w, at(voltage_v), voltage_v);
  }
  const RunResult three = bench.evaluate();
  REQUIRE(three.weighted.size() == 2);
  const WeightedResult& cec = three.weighted[1];
  CHECK(cec.title == "CEC efficiency");
  INFO(cec.efficiency.why);
  REQUIRE(cec.efficiency.known);
  const double expected = (cec_of(at(350)) + cec_of(at(kRatedV)) + cec_of(at(420))) / 3;
  CHECK(cec.efficiency.value == Approx(expected).epsilon(1e-9));
  REQUIRE(cec.uses.size() == 18);
  double weights = 0;
  for (const auto& use : cec.uses) weights += use.weight;
  CHECK(weights == Approx(1).epsilon(1e-12));
  CHECK(cec.uses.front().from.find("350 V") != std::string::npos);
  REQUIRE(three.weighted_sources.size() == 2);
  CHECK(three.weighted_sources[1].title == "CEC efficiency");

  // A step that was not measured refuses the figure, by its voltage and level.
  HandBench gap = inverter();
  for (const double voltage_v : {350.0, kRatedV, 420.0}) {
    for (const double load_w : kCecLevels) level(gap, load_w, at(voltage_v), voltage_v);
  }
  gap.run.steps.back().average_begin_ns.reset();
  gap.run.steps.back().average_end_ns.reset();
  const RunResult refused = gap.evaluate();
  CHECK(refused.weighted.at(1).title == "CEC efficiency");
  CHECK_FALSE(refused.weighted[1].efficiency.known);
  CHECK(refused.weighted[1].efficiency.why.find("420 V") != std::string::npos);
  CHECK(refused.weighted[1].efficiency.why.find("level 100 %") != std::string::npos);

  // Two voltages, or three of which one has not all levels.
  HandBench two = inverter();
  for (const double load_w : kCecLevels) level(two, load_w, at(kRatedV));
  for (const double load_w : kCecLevels) level(two, load_w, at(420), 420);
  level(two, 300.0, at(350), 350);
  const RunResult one = two.evaluate();
  CHECK(one.weighted.at(1).title == "CEC-weighted at 385 V");
  CHECK(one.weighted[1].efficiency.value == Approx(cec_of(at(kRatedV))).epsilon(1e-9));
}

TEST_CASE("the stair's load tolerance says how far a level is moved") {
  // 318 W instead of 300 W: 3 % of rated.
  HandBench bench = inverter();
  for (const double load_w : {30.0, 60.0, 120.0, 180.0, 318.0, 450.0, 600.0}) level(bench, load_w, parabola);
  const auto half_load = [&] {
    const RunResult result = bench.evaluate();
    CHECK(result.weighted.at(1).efficiency.value == Approx(cec_of(parabola)).epsilon(1e-5));
    return result.weighted.at(1).uses.at(3);
  };
  const auto by_model = half_load();
  CHECK(by_model.from == "loss model");
  CHECK_FALSE(by_model.shift);
  bench.stair.load_tolerance_percent = 5.0;
  const auto moved = half_load();
  CHECK(moved.from == "318 W");
  REQUIRE(moved.shift);
  const auto eta = [](double p) { return p / (p + parabola(p)); };
  // The slope is that at 318 W: p2 (18 W)^2 of loss is left over, 10 mW of 300 W.
  CHECK(moved.shift->value == Approx(eta(300) - eta(318)).margin(4e-5));
  CHECK(moved.shift->expanded.value_or(0) > 0);
  bench.stair.load_tolerance_percent = 0.0;
  CHECK(half_load().from == "loss model");
}
