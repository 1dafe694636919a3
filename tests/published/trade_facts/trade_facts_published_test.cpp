// Facts of the trade: common practice, no source.
#include <catch2/catch.hpp>
#include <cmath>

#include "analysis/efficiency/efficiency.h"

using namespace loadstair;
using estimate::Estimate;

namespace {

efficiency::Port port(std::string name, efficiency::Role role) {
  efficiency::Port out;
  out.name = std::move(name);
  out.role = role;
  out.sensing = efficiency::Sensing::at_terminals;
  return out;
}

efficiency::PortReading reading(double volt, double amp) {
  efficiency::PortReading out;
  out.voltage = Estimate{volt};
  out.current = Estimate{amp};
  return out;
}

}  // namespace

TEST_CASE("38.5 W out at 96.5 % means 39.9 W in (common practice, no source)") {
  efficiency::StepInput step;
  step.label = "40 W";
  step.ports = {port("input", efficiency::Role::input), port("output", efficiency::Role::output)};
  step.readings = {reading(39.9, 1), reading(38.5, 1)};
  const auto result = efficiency::step_result(step);
  REQUIRE(result.efficiency);
  CHECK(100 * result.efficiency->value() == Approx(96.5).margin(0.05));
  CHECK(38.5 / 0.965 == Approx(result.input_power->value()).margin(0.05));
  CHECK(result.loss->value() == Approx(1.4).epsilon(1e-12));
}

TEST_CASE("a bridge without boost needs the peak of its output as DC bus (common practice, no source)") {
  CHECK(std::round(*efficiency::least_dc_bus_v(220)) == 311);
  // 155.56 V: quoted as 155 V (cut) or 156 V (rounded).
  CHECK(*efficiency::least_dc_bus_v(110) > 155);
  CHECK(*efficiency::least_dc_bus_v(110) < 156);
}

TEST_CASE(
    "0.5 V over 0.1 ohm trips at 5 A, of the kind that the threshold acts on (common practice, no source)") {
  const Estimate threshold{0.5};
  const Estimate resistor{0.1};
  const auto rms = efficiency::trip_current(threshold, resistor, efficiency::Sense::rms);
  REQUIRE(rms);
  CHECK(rms->value() == Approx(5).epsilon(1e-14));
  CHECK(220 * rms->value() == Approx(1100).epsilon(1e-14));
  const auto peak = efficiency::trip_current(threshold, resistor, efficiency::Sense::peak);
  REQUIRE(peak);
  CHECK(std::round(220 * peak->value()) == 778);
  // A lamp's inrush or a rectifier load has a higher crest: the peak is reached at less RMS current.
  const auto peaky =
      efficiency::trip_current(threshold, resistor, efficiency::Sense::peak, {Estimate{2.5}, Estimate{1.6}});
  REQUIRE(peaky);
  CHECK(peaky->value() == Approx(2).epsilon(1e-14));
  const auto average = efficiency::trip_current(threshold, resistor, efficiency::Sense::average);
  REQUIRE(average);
  CHECK(average->value() == Approx(5 * 1.1107).epsilon(1e-4));
  CHECK_FALSE(efficiency::trip_current(threshold, Estimate{0}, efficiency::Sense::rms));
}

TEST_CASE("a voltmeter left across a 40 W output changes the efficiency read (common practice, no source)") {
  // A moving-iron voltmeter of 10 kilohm across 230 V takes 5.3 W, which the ammeter beyond it does not see.
  const double load_amp = 40.0 / 230.0;
  efficiency::StepInput step;
  step.label = "40 W";
  step.ports = {port("input", efficiency::Role::input), port("output", efficiency::Role::output)};
  step.readings = {reading(385, 47.0 / 385), reading(230, load_amp)};
  const auto blind = efficiency::step_result(step);
  step.ports[1].voltmeter_impedance = efficiency::Resistance{"voltmeter on the output", 10e3, 0.01};
  const auto corrected = efficiency::step_result(step);
  REQUIRE(blind.efficiency);
  REQUIRE(corrected.efficiency);
  CHECK(corrected.output_power->value() == Approx(40 + 230.0 * 230.0 / 10e3).epsilon(1e-12));
  CHECK(100 * (corrected.efficiency->value() - blind.efficiency->value()) ==
        Approx(100 * 5.29 / 47).epsilon(1e-12));
  REQUIRE(corrected.ports[1].correction);
  CHECK(corrected.ports[1].correction->value() == Approx(5.29).epsilon(1e-12));
  // A meter of 10 megohm would have taken 5 mW.
  step.ports[1].voltmeter_impedance = efficiency::Resistance{"voltmeter on the output", 10e6, 0.01};
  const auto modern = efficiency::step_result(step);
  CHECK(modern.efficiency->value() - blind.efficiency->value() == Approx(0.00529 / 47).epsilon(1e-9));
}
