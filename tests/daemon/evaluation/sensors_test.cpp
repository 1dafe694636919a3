// Thermometers read in ohms, shunts in another room, one meter typed twice, and where specifications hold.
#include <catch2/catch.hpp>
#include <cmath>

#include "daemon/evaluation/circumstances.h"
#include "daemon/evaluation/ideal_run.h"
#include "daemon/evaluation/live.h"
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

setup::Channel& thermometer(HandBench& bench) {
  setup::Channel& channel =
      bench.link("heatsink", setup::Quantity::temperature, "degC", {.reading_percent = 0.0, .upto = 400.0});
  bench.hookup.temperatures.push_back({"heatsink", "heatsink", ""});
  return channel;
}

}  // namespace

TEST_CASE("a platinum thermometer reads IEC 60751's table and carries its class") {
  HandBench bench = stoat_bench();
  setup::Channel& channel = thermometer(bench);
  channel.conversion.platinum = setup::Platinum{.r0_ohm = 100.0, .tolerance_class = "B", .lead_ohm = 0.5};
  // IEC 60751:2008 table 1: 138.51 ohm at 100 degC; the wires come on top.
  bench.read_window("heatsink", 0, 138.51 + 0.5);
  const StepResult step = bench.evaluate().steps.at(0);
  REQUIRE(step.temperatures.size() == 1);
  const Quantity& end = step.temperatures[0].end;
  REQUIRE(end.known);
  CHECK(end.value == Approx(100.0).margin(0.02));
  // Class B: 0.3 + 0.005 t (IEC 60751:2008 table 3); the leads are known to 30 %, 0.15 ohm of 0.379 ohm/K.
  const double tolerance_k = 0.8 / std::sqrt(3.0);
  const double leads_k = 0.3 * 0.5 / 0.379 / std::sqrt(3.0);
  CHECK((end.high - end.low) / 2.0 == Approx(kNormal95 * std::hypot(tolerance_k, leads_k)).epsilon(0.01));
}

TEST_CASE("a thermistor's own error is its declared one, or not known") {
  HandBench bench = stoat_bench();
  setup::Channel& channel = thermometer(bench);
  channel.conversion.thermistor = setup::Thermistor{.r25_ohm = 10000.0, .beta_k = 3950.0};
  channel.ranges[0].upto = 1e6;
  bench.read_window("heatsink", 0, 10000.0);
  Quantity end = bench.evaluate().steps.at(0).temperatures.at(0).end;
  CHECK(end.value == Approx(25.0).margin(1e-6));
  CHECK_FALSE(end.uncertainty_known);
  channel.conversion.thermistor->tolerance_k = 0.5;
  end = bench.evaluate().steps.at(0).temperatures.at(0).end;
  CHECK((end.high - end.low) / 2.0 == Approx(kNormal95 * 0.5 / std::sqrt(3.0)).epsilon(0.01));
}

TEST_CASE("conversions backwards and forwards meet") {
  setup::Channel channel;
  channel.name = "one";
  channel.conversion.scale = 2.0;
  const auto round_trip = [&](double value, double within) {
    const auto raw = raw_of(channel, value, 23.0);
    REQUIRE(raw);
    const auto back = convert(channel, *raw, 23.0);
    REQUIRE(back);
    CHECK(*back == Approx(value).margin(within));
  };
  round_trip(12.5, 1e-12);
  channel.conversion.shunt =
      setup::Shunt{.resistance_ohm = 0.002, .tempco_ppm_per_k = 50.0, .rise_k_per_w = 8.0, .ambient_c = 40.0};
  round_trip(20.0, 1e-9);
  channel.conversion.shunt.reset();
  channel.conversion.thermocouple = setup::Thermocouple{.cold_junction = "cold"};
  round_trip(85.0, 1e-6);
  channel.conversion.thermocouple.reset();
  channel.conversion.platinum = setup::Platinum{.r0_ohm = 1000.0, .lead_ohm = 0.4};
  round_trip(85.0, 1e-6);
  channel.conversion.platinum.reset();
  channel.conversion.thermistor = setup::Thermistor{.r25_ohm = 10000.0, .beta_k = 3950.0};
  round_trip(85.0, 1e-6);
  // Steinhart and Hart's three of a 10 kohm bead (from memory).
  channel.conversion.thermistor = setup::Thermistor{.a = 1.129148e-3, .b = 2.34125e-4, .c = 8.76741e-8};
  round_trip(85.0, 1e-6);
}

TEST_CASE("a shunt in a warm room has more ohms") {
  HandBench bench = stoat_bench({.reading_percent = 0.0});
  bench.hookup.channels[1].conversion.shunt = setup::Shunt{
      .resistance_ohm = 0.1, .tempco_ppm_per_k = 100.0, .ambient_c = 43.0, .ambient_tolerance_k = 5.0};
  const StepResult step = bench.evaluate().steps.at(0);
  const Quantity& current = step.ports.at(0).current;
  CHECK(current.value == Approx(39.9 / 48.0 / (0.1 * (1.0 + 100e-6 * 20.0))).epsilon(1e-9));
  CHECK((current.high - current.low) / 2.0 ==
        Approx(kNormal95 * current.value * 100e-6 * 5.0 / std::sqrt(3.0)).epsilon(0.01));
}

TEST_CASE("one meter typed at both ports is one meter: its gain drops out") {
  const auto u_of = [](const std::string& meter) {
    HandBench bench;
    bench.hookup.channels.reserve(16);
    for (const char* name : {"input voltage", "input current", "output voltage", "output current"}) {
      const bool amps = std::string{name}.find("current") != std::string::npos;
      setup::Channel& channel = bench.type(name, amps ? setup::Quantity::current : setup::Quantity::voltage,
                                           amps ? "A" : "V", {.reading_percent = amps ? 0.0 : 0.5});
      if (!amps) channel.meter = meter;
    }
    setup::Port& input = bench.port("input", setup::Direction::input);
    input.voltage = "input voltage";
    input.current = "input current";
    setup::Port& output = bench.port("output", setup::Direction::output);
    output.voltage = "output voltage";
    output.current = "output current";
    bench.step("40 W", 40.0);
    const double values[] = {48.0, 0.83, 12.0, 3.21};
    for (int round = 1; round <= 2; ++round) {
      for (std::size_t i = 0; i < 4; ++i)
        bench.type_round(bench.hookup.channels[i].name, 0, round, values[i], 1.0 + 4.0 * round, 0.0);
    }
    const Quantity efficiency = bench.evaluate().steps.at(0).efficiency;
    REQUIRE(efficiency.known);
    return (efficiency.high - efficiency.low) / 2.0 / efficiency.value;
  };
  const double u = 0.005 / std::sqrt(3.0);
  CHECK(u_of("") == Approx(kNormal95 * u * std::sqrt(2.0)).epsilon(0.1));
  // What is left are the tenths that are new at every reading.
  CHECK(u_of("hand-held 1") == Approx(kNormal95 * u * std::sqrt(0.2)).epsilon(0.1));
}

TEST_CASE("outside its conditions a specification is told, and grows where the file says how") {
  HandBench bench = stoat_bench({.reading_percent = 0.5});
  setup::Channel& voltage = bench.hookup.channels[0];
  voltage.conditions.low_c = 18.0;
  voltage.conditions.high_c = 28.0;
  bench.stair.ambient_c = 33.0;
  const double before = *bench.evaluate().steps.at(0).ports.at(0).voltage.expanded;
  const StepResult flagged = bench.evaluate().steps.at(0);
  CHECK(mentions(flagged.remarks, "input voltage: ambient 33"));
  CHECK(mentions(flagged.remarks, "left as specified"));
  CHECK(before == Approx(kNormal95 * 48.0 * 0.005 / std::sqrt(3.0)).epsilon(1e-9));
  // A tenth of the specification for each of five kelvin: half as much again.
  voltage.conditions.percent_of_spec_per_k = 10.0;
  const StepResult grown = bench.evaluate().steps.at(0);
  CHECK(*grown.ports.at(0).voltage.expanded == Approx(1.5 * before).epsilon(1e-9));
  CHECK_FALSE(mentions(grown.remarks, "left as specified"));
  bench.stair.ambient_c = 25.0;
  CHECK_FALSE(mentions(bench.evaluate().steps.at(0).remarks, "ambient"));
}

TEST_CASE("age of the calibration, least share of the range and the band are held against the run") {
  HandBench bench = stoat_bench();
  setup::Channel& voltage = bench.hookup.channels[0];
  bench.hookup.instruments[0].calibrated = "2025-09-01";  // the run is of 2026-09-21
  voltage.conditions.days = 365.0;
  voltage.conditions.least_percent_of_range = 10.0;
  StepResult step = bench.evaluate().steps.at(0);
  CHECK(mentions(step.remarks, "input voltage: adjusted 385"));
  CHECK(mentions(step.remarks, "input voltage: the reading is 4.8 % of the range"));
  bench.hookup.instruments[0].calibrated = "";
  step = bench.evaluate().steps.at(0);
  CHECK(mentions(step.remarks, "input voltage: its accuracy depends on the time since adjustment"));
  // A day is a day: 2026-01-01 to the run's start, 1 790 000 000 s after 1970.
  CHECK(days_since("2026-01-01", kStart).value_or(0.0) == Approx(263.5925926).epsilon(1e-9));
  CHECK_FALSE(days_since("2027-01-01", kStart));
  CHECK_FALSE(days_since("soon", kStart));
}
