#include "analysis/efficiency/step.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <vector>

#include "analysis/efficiency/curve.h"
#include "analysis/estimate/coverage.h"
#include "analysis/estimate/meter.h"
#include "tests/analysis/random_source.h"

using namespace loadstair;
using efficiency::Port;
using efficiency::PortReading;
using efficiency::Role;
using estimate::Estimate;

namespace {

Port dc_port(std::string name, Role role) {
  Port out;
  out.name = std::move(name);
  out.role = role;
  out.sensing = efficiency::Sensing::at_terminals;
  return out;
}

PortReading exactly(double volt, double amp) {
  PortReading out;
  out.voltage = Estimate{volt};
  out.current = Estimate{amp};
  return out;
}

}  // namespace

TEST_CASE("any number of ports is summed, auxiliaries as declared") {
  efficiency::StepInput step;
  step.label = "half load";
  step.ports = {dc_port("battery", Role::input), dc_port("panel", Role::input),
                dc_port("fan supply", Role::auxiliary_input), dc_port("rail 1", Role::output),
                dc_port("rail 2", Role::output)};
  step.readings = {exactly(48, 2), exactly(40, 1), exactly(12, 0.5), exactly(12, 5), exactly(5, 10)};
  const auto counted = efficiency::step_result(step);
  REQUIRE(counted.efficiency);
  CHECK(counted.input_power->value() == 142);
  CHECK(counted.output_power->value() == 110);
  CHECK(counted.loss->value() == 32);
  CHECK(counted.efficiency->value() == Approx(110.0 / 142).epsilon(1e-15));
  CHECK(counted.remarks == std::vector<std::string>{"auxiliary fan supply: 6.000 W, counted"});
  step.ports[2].counted = false;
  const auto bare = efficiency::step_result(step);
  CHECK(bare.input_power->value() == 136);
  CHECK(bare.remarks == std::vector<std::string>{"auxiliary fan supply: 6.000 W, not counted"});
  CHECK(bare.state == "measured");
  // An auxiliary that is not counted does not spoil the step when its meter is gone.
  step.readings[2].current = estimate::Quoted{base::Refusal{"fan current", "silent"}};
  const auto gone = efficiency::step_result(step);
  CHECK(gone.efficiency);
  CHECK(gone.state == "measured");
}

TEST_CASE("four meters of 0.5 % give about one point, one pair moved between ports far less") {
  // Four meters at 0.5 % each give about one point; closed form: 1.96 * 0.965 * sqrt 4 * 0.5
  // %/sqrt 3.
  const auto meter = [](const char* name, const char* function) {
    return estimate::MeterRange{{name, function, "range"}, 0, 0, estimate::AccuracySpec{0.5, 0, 0}};
  };
  const auto reading = [](double value, const estimate::MeterRange& range, const char* level) {
    return estimate::with_meter_error(value, range, {"run", level});
  };
  efficiency::StepInput step;
  step.label = "full load";
  step.ports = {dc_port("input", Role::input), dc_port("output", Role::output)};
  step.readings.resize(2);
  step.readings[0].voltage = reading(385, meter("V1", "dc voltage"), "1 in");
  step.readings[0].current = reading(1.6, meter("A1", "dc current"), "1 in");
  step.readings[1].voltage = reading(48, meter("V2", "dc voltage"), "1 out");
  step.readings[1].current = reading(0.965 * 385 * 1.6 / 48, meter("A2", "dc current"), "1 out");
  const auto four = efficiency::step_result(step);
  REQUIRE(four.efficiency);
  const double u = 0.005 / std::sqrt(3);
  CHECK(four.efficiency->standard_uncertainty() == Approx(0.965 * 2 * u).epsilon(1e-12));
  CHECK(estimate::coverage(*four.efficiency).expanded == Approx(0.0109).epsilon(0.01));

  step.readings[1].voltage = reading(48, meter("V1", "dc voltage"), "1 out");
  step.readings[1].current = reading(0.965 * 385 * 1.6 / 48, meter("A1", "dc current"), "1 out");
  const auto pair = efficiency::step_result(step);
  REQUIRE(pair.efficiency);
  CHECK(pair.efficiency->standard_uncertainty() == Approx(0.965 * u * std::sqrt(4 * 0.1)).epsilon(1e-12));
  CHECK(pair.output_power->standard_uncertainty() ==
        Approx(four.output_power->standard_uncertainty()).epsilon(1e-12));
}

TEST_CASE("a step without a power says why, and never quotes a number") {
  efficiency::StepInput step;
  step.label = "10 %";
  step.ports = {dc_port("input", Role::input), dc_port("output", Role::output)};
  step.ports[1].current = efficiency::Current::ac;
  step.readings = {exactly(385, 0.2), exactly(230, 0.3)};
  const auto apparent = efficiency::step_result(step);
  CHECK(apparent.state == "apparent power only");
  CHECK_FALSE(apparent.efficiency);
  CHECK(apparent.efficiency.refusal().place == "output");
  CHECK(apparent.input_power);
  step.readings[0].voltage =
      estimate::Quoted{base::Refusal{"input voltage", "no good reading in the window"}};
  const auto missing = efficiency::step_result(step);
  CHECK(missing.state == "missing channel input voltage: no good reading in the window");
  CHECK_FALSE(missing.input_power);
  CHECK_FALSE(missing.loss);

  step.ports[1].current = efficiency::Current::dc;
  step.readings[0] = exactly(385, -0.2);
  const auto reversed = efficiency::step_result(step);
  REQUIRE_FALSE(reversed.efficiency);
  CHECK(reversed.efficiency.refusal().reason == "the input power is not above zero: -77.00 W");
  CHECK(reversed.loss);
  step.ports.pop_back();
  step.readings.pop_back();
  CHECK(efficiency::step_result(step).output_power.refusal().reason == "no output port is declared");
}

TEST_CASE("an interval that passes 100 % is shown, not clipped, with a remark") {
  efficiency::StepInput step;
  step.label = "light load";
  step.ports = {dc_port("input", Role::input), dc_port("output", Role::output)};
  step.readings = {exactly(10, 1), exactly(9.95, 1)};
  step.readings[0].current =
      Estimate{1, estimate::make_type_b("A1", "A1", estimate::Distribution::normal), 0.01};
  const auto found = efficiency::step_result(step);
  REQUIRE(found.efficiency);
  CHECK(estimate::coverage(*found.efficiency).high > 1);
  REQUIRE(found.remarks.size() == 1);
  CHECK(found.remarks[0] ==
        "the interval of the efficiency passes 100 %: the meters do not resolve the loss");
}

TEST_CASE("a load that drifts moves the powers and leaves the efficiency alone") {
  std::vector<double> t;
  std::vector<double> in;
  std::vector<double> out;
  for (int i = 0; i < 100; ++i) {
    t.push_back(0.2 * i);
    in.push_back(400 + 0.5 * t.back());
    out.push_back(0.96 * in.back());
  }
  const std::vector<efficiency::PortSeries> ports{{Role::input, true, in}, {Role::output, true, out}};
  const auto noise = efficiency::step_noise(t, ports, {"run", "step"});
  REQUIRE(noise);
  const double drift = 0.5 * 19.8 / std::sqrt(12);
  CHECK(noise->input_power.standard_uncertainty() == Approx(drift).epsilon(1e-6));
  CHECK(noise->output_power.standard_uncertainty() == Approx(0.96 * drift).epsilon(1e-6));
  CHECK(noise->loss.standard_uncertainty() == Approx(0.04 * drift).epsilon(1e-6));
  CHECK(noise->efficiency.standard_uncertainty() == Approx(0).margin(1e-12));
  CHECK(noise->input_power.value() == 0);
  CHECK(noise->count == 100);
  CHECK_FALSE(noise->too_short);
}

TEST_CASE("the noise of an efficiency is that of its own series, whatever the load does") {
  // The load wanders slowly and alike at both ports; each meter adds white noise. 500 windows: the share that
  // holds scatters by 1 % at 95 %; false alarm below 1e-3 for the band, 2 % wider below for N_eff being
  // estimated.
  const auto seed = tests::seed_of_tests();
  INFO("LOADSTAIR_SEED=" << seed);
  tests::RandomSource random{seed};
  int held = 0;
  const int windows = 500;
  for (int k = 0; k < windows; ++k) {
    std::vector<double> t;
    std::vector<double> in;
    std::vector<double> out;
    double wander = 0;
    for (int i = 0; i < 300; ++i) {
      wander = 0.97 * wander + 0.5 * random.normal();
      t.push_back(0.1 * i);
      in.push_back(400 + wander + 0.2 * random.normal());
      out.push_back(0.96 * (400 + wander) + 0.2 * random.normal());
    }
    const std::vector<efficiency::PortSeries> ports{{Role::input, true, in}, {Role::output, true, out}};
    const auto noise = efficiency::step_noise(t, ports, {"run", "step"});
    REQUIRE(noise);
    double sum_in = 0;
    double sum_out = 0;
    for (int i = 0; i < 300; ++i)
      sum_in += in[static_cast<std::size_t>(i)], sum_out += out[static_cast<std::size_t>(i)];
    if (std::abs(sum_out / sum_in - 0.96) <= estimate::coverage(noise->efficiency).expanded) ++held;
    // The loss wanders little too; the powers far more than white noise would let them.
    REQUIRE(noise->input_power.standard_uncertainty() > 5 * 400 * noise->efficiency.standard_uncertainty());
  }
  INFO("held " << held);
  CHECK(held >= 455);
  CHECK(held <= 492);
}

TEST_CASE("noise refuses ports of other instants and survives an input that crosses zero") {
  const std::vector<double> t{0, 1, 2, 3, 4};
  const std::vector<double> power{0, 1, 2, 1, 0};
  const std::vector<double> shorter{1, 2};
  const std::vector<efficiency::PortSeries> uneven{{Role::input, true, power}, {Role::output, true, shorter}};
  CHECK_FALSE(efficiency::step_noise(t, uneven, {"run", "step"}));
  const std::vector<efficiency::PortSeries> idle{{Role::input, true, power}};
  const auto noise = efficiency::step_noise(t, idle, {"run", "step"});
  REQUIRE(noise);
  CHECK(noise->too_short);
  CHECK(noise->efficiency.standard_uncertainty() == 0);
  const std::vector<double> nothing{0, 0, 0, 0, 0};
  const std::vector<efficiency::PortSeries> off{{Role::input, true, nothing}};
  const auto dark = efficiency::step_noise(t, off, {"run", "step"});
  REQUIRE(dark);
  CHECK(dark->efficiency.terms().empty());
}

TEST_CASE("bursts that bring the input down to nothing count in the efficiency as in the input") {
  // The output is constant, so the efficiency is known as badly as the mean input: u(eta)/eta = u(P_in)/P_in
  // (chain rule). On for 6 of 10 readings, at random.
  tests::RandomSource random{1};
  std::vector<double> t, in;
  for (int i = 0; i < 200; ++i) {
    t.push_back(0.5 * i);
    in.push_back(random.uniform() < 0.6 ? 10.0 / 0.6 : 0.0);
  }
  const std::vector<double> out(t.size(), 9.0);
  const std::vector<efficiency::PortSeries> ports{{Role::input, true, in}, {Role::output, true, out}};
  const auto noise = efficiency::step_noise(t, ports, {"run", "step"});
  REQUIRE(noise);
  double mean = 0;
  for (const double power : in) mean += power / static_cast<double>(in.size());
  const double relative = noise->input_power.standard_uncertainty() / mean;
  REQUIRE(relative > 0.01);
  CHECK(noise->efficiency.standard_uncertainty() / (9.0 / mean) == Approx(relative).epsilon(1e-9));
}

TEST_CASE("power factor is that of the one AC output") {
  efficiency::StepInput step;
  step.label = "step";
  step.ports = {dc_port("input", Role::input), dc_port("output", Role::output)};
  step.ports[1].current = efficiency::Current::ac;
  step.readings = {exactly(385, 1.2), exactly(230, 2)};
  step.readings[1].power = Estimate{437};
  const auto found = efficiency::step_result(step);
  REQUIRE(found.power_factor);
  CHECK(found.power_factor->value() == Approx(0.95).epsilon(1e-14));
  CHECK(found.ports[1].method == "wattmeter");
  const std::vector<efficiency::StepResult> steps{found};
  const auto points = efficiency::curve(steps);
  REQUIRE(points.size() == 1);
  CHECK(points[0].efficiency.value() == Approx(437.0 / 462).epsilon(1e-14));
}
