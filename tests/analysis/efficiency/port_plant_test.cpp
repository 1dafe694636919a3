// A port's power against a plant in closed form: what flows into or out of the converter, and what ideal
// meters of a bench show of it.
#include <catch2/catch.hpp>
#include <cmath>
#include <numbers>
#include <vector>

#include "analysis/efficiency/port.h"
#include "analysis/estimate/coverage.h"

using namespace loadstair;
using efficiency::Port;
using efficiency::PortReading;
using efficiency::Resistance;
using estimate::Estimate;

namespace {

/// A single-phase inverter on a source of E behind R: it draws I + sqrt 2 I_r sin(2 pi 100 Hz t), so that
/// v = E - R i and the power into it is (E - R I) I - R I_r^2.
struct InverterInput {
  double source_v = 400;
  double source_ohm = 2;
  double mean_a = 0;
  double ripple = 0.30;  ///< RMS over mean

  [[nodiscard]] double ripple_a() const { return ripple * mean_a; }
  [[nodiscard]] double mean_v() const { return source_v - source_ohm * mean_a; }
  [[nodiscard]] double power_w() const { return mean_v() * mean_a - source_ohm * ripple_a() * ripple_a(); }
  /// mean of (v - V)(i - I) as a capture of ten cycles finds it, 200 samples a cycle.
  [[nodiscard]] double captured_ripple_w() const {
    const int samples = 2000;
    std::vector<double> v;
    std::vector<double> i;
    for (int k = 0; k < samples; ++k) {
      const double angle = 2 * std::numbers::pi * 100.0 * k / 20'000.0;
      i.push_back(mean_a + std::numbers::sqrt2 * ripple_a() * std::sin(angle));
      v.push_back(source_v - source_ohm * i.back());
    }
    double product = 0;
    double of_v = 0;
    double of_i = 0;
    for (std::size_t k = 0; k < v.size(); ++k) {
      product += v[k] * i[k] / samples;
      of_v += v[k] / samples;
      of_i += i[k] / samples;
    }
    return product - of_v * of_i;
  }
};

Port input_port() {
  Port port;
  port.name = "input";
  port.sensing = efficiency::Sensing::at_terminals;
  return port;
}

PortReading ideal(double voltage_v, double current_a) {
  PortReading reading;
  reading.voltage = Estimate{voltage_v};
  reading.current = Estimate{current_a};
  return reading;
}

double power_of(const Port& port, const PortReading& reading) {
  const auto found = efficiency::port_power(port, reading);
  REQUIRE(found.active_power);
  return found.active_power->value();
}

}  // namespace

TEST_CASE("an inverter's input with 30 % ripple behind 2 ohm: the capture gives its power") {
  for (const double mean_a : {0.3, 1.6, 4.0}) {
    InverterInput plant;
    plant.mean_a = mean_a;
    PortReading reading = ideal(plant.mean_v(), plant.mean_a);
    const double means_only = power_of(input_port(), reading);
    // The product of the means alone is too much by R I_r^2.
    CHECK(means_only - plant.power_w() == Approx(2 * 0.09 * mean_a * mean_a).epsilon(1e-9));
    reading.ripple_power = Estimate{plant.captured_ripple_w()};
    CHECK(power_of(input_port(), reading) == Approx(plant.power_w()).margin(0.02));
    CHECK(power_of(input_port(), reading) == Approx(plant.power_w()).epsilon(1e-10));
  }
}

TEST_CASE("without a capture the inverter's input power lies inside the bound, ripple or none") {
  for (const double ripple : {0.0, 0.1, 0.2, 0.30}) {
    InverterInput plant;
    plant.mean_a = 1.6;
    plant.ripple = ripple;
    PortReading reading = ideal(plant.mean_v(), plant.mean_a);
    // Declared as 30 %, whatever it is: the power lies between none and all of the bound below V I.
    reading.ripple_power =
        *efficiency::ripple_bound(input_port(), 0.30 * plant.mean_a, plant.source_ohm, "1");
    const auto found = efficiency::port_power(input_port(), reading);
    REQUIRE(found.active_power);
    const double bound = plant.source_ohm * 0.09 * 1.6 * 1.6;
    CHECK(std::abs(found.active_power->value() - plant.power_w()) <= bound / 2 * (1 + 1e-9));
    const auto interval = estimate::coverage(*found.active_power);
    CHECK(interval.low <= plant.power_w());
    CHECK(interval.high >= plant.power_w());
    CHECK(interval.expanded < bound);
  }
}

TEST_CASE("a voltmeter of 1.5 kilohm across a 40 W output is corrected to 0.05 W") {
  struct Output {
    double voltage_v;
    efficiency::Current current;
  };
  for (const Output& output : {Output{12, efficiency::Current::dc}, Output{48, efficiency::Current::dc},
                               Output{110, efficiency::Current::ac}}) {
    // The converter feeds a resistor that takes 40 W less what goes through the voltmeter at its terminals.
    const double through_meter_w = output.voltage_v * output.voltage_v / 1500;
    const double load_a = (40 - through_meter_w) / output.voltage_v;
    Port port = input_port();
    port.name = "output";
    port.role = efficiency::Role::output;
    port.current = output.current;
    PortReading reading = ideal(output.voltage_v, load_a);
    if (output.current == efficiency::Current::ac) reading.power_factor = Estimate{1};
    CHECK(40 - power_of(port, reading) == Approx(through_meter_w).epsilon(1e-9));
    // Declared to 0.5 %, which is what it may be off by.
    port.voltmeter_impedance = Resistance{"V2: burden", 1500 * 1.005, 0.005};
    CHECK(power_of(port, reading) == Approx(40).margin(0.05));
    port.voltmeter_impedance->ohm = 1500;
    CHECK(power_of(port, reading) == Approx(40).epsilon(1e-12));
    // Without a declared tolerance the correction is as good as 30 % of itself.
    port.voltmeter_impedance->tolerance.reset();
    const auto found = efficiency::port_power(port, reading);
    REQUIRE(found.active_power);
    CHECK(found.active_power->standard_uncertainty() ==
          Approx(0.3 / std::sqrt(3.0) * through_meter_w).epsilon(1e-9));
  }
}
