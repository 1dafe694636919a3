// What a person's hands do to the wiring of the rehearsed bench, and meters whose circuits belong together.
#include <boost/asio/io_context.hpp>
#include <catch2/catch.hpp>
#include <cmath>

#include "drivers/rehearsal/bench.h"
#include "drivers/rehearsal/simulator.h"

namespace loadstair::rehearsal {
namespace {

MeterFunction voltage_at(Port port) {
  MeterFunction f;
  f.name = "reading";
  f.port = port;
  f.node = Node::terminals;
  f.ranges = {{600.0, 0.0, 0.1, 0.05, 0.0, 0.0}};
  return f;
}

InstrumentDescription display(const std::string& name, MeterFunction function) {
  InstrumentDescription d;
  d.name = name;
  d.service = Service::display;
  d.link = LinkKind::none;
  d.meter.functions = {std::move(function)};
  return d;
}

/// Two voltmeters of a DC-DC converter, 48 V in and 12 V out, and an ammeter in each port.
BenchDescription four_meters(std::uint64_t seed) {
  BenchDescription d;
  d.seed = seed;
  d.plant.converter.kind = ConverterKind::dcdc;
  d.plant.converter.output.nominal_voltage_v = 12.0;
  d.plant.converter.output.impedance_ohm = 0.002;
  d.plant.converter.input.nominal_voltage_v = 48.0;
  d.plant.converter.input.least_voltage_v = 36.0;
  d.plant.converter.overload.sense_ohm = 0.0;
  d.at_start.source_voltage_v = 48.0;
  d.at_start.source_on = true;
  d.at_start.load_on = true;
  d.at_start.load_power_w = 60.0;
  MeterFunction in = voltage_at(Port::input);
  MeterFunction out = voltage_at(Port::output);
  MeterFunction in_current = voltage_at(Port::input);
  in_current.quantity = Quantity::current;
  in_current.ranges = {{10.0, 0.0, 0.1, 0.05, 0.0, 0.0}};
  MeterFunction out_current = in_current;
  out_current.port = Port::output;
  out_current.shunt = Shunt{0.01, 0.0};
  out_current.ranges = {{0.2, 0.0, 0.1, 0.05, 0.0, 0.0}};
  d.instruments = {display("v in", in), display("v out", out), display("a in", in_current),
                   display("a out", out_current)};
  const std::vector<std::string> names = {"input voltage", "output voltage", "input current",
                                          "output current"};
  for (std::size_t i = 0; i < names.size(); ++i)
    d.circuits.push_back({names[i], d.instruments[i].name, "reading"});
  return d;
}

struct HandBench {
  explicit HandBench(const BenchDescription& d)
      : clock{link::VirtualClock::make(io, 0)}, bench{io.get_executor(), *clock, d}, twin{d} {
    REQUIRE(bench.start().ok());
  }
  boost::asio::io_context io{1};
  std::unique_ptr<link::VirtualClock> clock;
  RehearsedBench bench;
  Simulator twin;  ///< the same meters, to ask for their drawn errors
};

TEST_CASE("the actions of a rehearsed person, and what is none", "[rehearsal]") {
  HandBench hands{four_meters(1)};
  CHECK(hands.bench.perform("short inputs").ok());
  CHECK(hands.bench.perform("restore; short input voltage,output voltage ; source output 0").ok());
  CHECK_FALSE(hands.bench.plant().settings.source_on);
  CHECK(hands.bench.perform("restore; tie input voltage, output voltage; source output 1").ok());
  CHECK(hands.bench.plant().settings.source_on);
  CHECK_FALSE(hands.bench.perform("short nothing").ok());
  CHECK_FALSE(hands.bench.perform("tie input voltage, input current").ok());
  CHECK_FALSE(hands.bench.perform("restore it").ok());
  CHECK_FALSE(hands.bench.perform("").ok());
  CHECK_FALSE(hands.bench.perform(" ; ").ok());
  CHECK(hands.bench.log().size() == 7);  // what was done, action by action
}

TEST_CASE("shorted inputs show the meter's own offset, restored ones the bench", "[rehearsal]") {
  for (std::uint64_t seed = 1; seed <= 20; ++seed) {
    Simulator bench{four_meters(seed)};
    bench.advance(3.0);
    const double before = bench.read(0, 3.0)[0].value;
    CHECK(before == Approx(48.0).epsilon(0.02));
    bench.short_circuit({0, 0}, 3.0);
    CHECK(bench.read(0, 4.0)[0].value == bench.meter(0).error(0, 0, 0.0).offset);
    CHECK(std::abs(bench.read(0, 4.0)[0].value) <= 0.0005 * 600.0);
    CHECK(bench.read(1, 4.0)[0].value == Approx(12.0).epsilon(0.05));  // the other one is where it was
    bench.restore_wiring(4.0);
    CHECK(bench.read(0, 5.0)[0].value == Approx(before).epsilon(1e-4));
  }
}

TEST_CASE("tied meters see one quantity and differ by their own errors", "[rehearsal]") {
  for (std::uint64_t seed = 1; seed <= 20; ++seed) {
    Simulator bench{four_meters(seed)};
    REQUIRE(bench.tie({0, 0}, {1, 0}, 0.0).ok());
    REQUIRE(bench.tie({2, 0}, {3, 0}, 0.0).ok());
    bench.advance(3.0);
    const StepMeans now = bench.history().means(2.9, 3.0);
    const double volts = now.input.voltage[0].mean;
    const double amperes = now.input.meter_current.mean;
    const auto shows = [&bench](std::size_t meter, double value) {
      const DrawnError e = bench.meter(meter).error(0, 0, value);
      return value * (1.0 + e.gain) + e.offset;
    };
    CHECK(bench.read(0, 3.0)[0].value == Approx(shows(0, volts)).epsilon(1e-9));
    CHECK(bench.read(1, 3.0)[0].value == Approx(shows(1, volts)).epsilon(1e-9));
    CHECK(bench.read(2, 3.0)[0].value == Approx(shows(2, amperes)).epsilon(1e-9));
    // The shunt of 10 mohm goes along with its meter, and its ten milliohm are in the input's way now.
    CHECK(bench.read(3, 3.0)[0].value == Approx(shows(3, 0.01 * amperes)).epsilon(1e-9));
    CHECK(bench.plant().input_burden.ammeter_ohm == Approx(0.01));
    CHECK(bench.plant().output_burden.ammeter_ohm == 0.0);
  }
}

TEST_CASE("a dead, an idle and a sleeping bench", "[rehearsal]") {
  Simulator bench{four_meters(3)};
  bench.advance(3.0);
  REQUIRE(bench.turn(Knob::load_input, 0.0, 3.0).ok());
  bench.advance(4.0);
  const auto& loss = bench.plant().parameters().converter.loss;
  // What the two idle powers are is what the description says.
  CHECK(bench.plant().last().input.power_w == Approx(loss.no_load_w).epsilon(0.05));
  REQUIRE(bench.turn(Knob::converter, 0.0, 4.0).ok());
  bench.advance(5.0);
  CHECK(bench.plant().last().input.power_w == Approx(loss.standby_w).epsilon(1e-9));
  CHECK(bench.plant().last().output.voltage[0].mean == 0.0);
  REQUIRE(bench.turn(Knob::source_output, 0.0, 5.0).ok());
  bench.advance(6.0);
  CHECK(bench.plant().last().input.voltage[0].mean == 0.0);
  CHECK(bench.plant().last().input.power_w == 0.0);
}

TEST_CASE("resistance thermometers have what their standards say", "[rehearsal]") {
  // IEC 60751:2008, table 1, Pt100, printed to 0.01 ohm.
  ResistanceSensor platinum;
  platinum.r0_ohm = 100.0;
  CHECK(resistance_at(platinum, -100.0) == Approx(60.26).margin(0.005));
  CHECK(resistance_at(platinum, -50.0) == Approx(80.31).margin(0.005));
  CHECK(resistance_at(platinum, 0.0) == 100.0);
  CHECK(resistance_at(platinum, 100.0) == Approx(138.51).margin(0.005));
  CHECK(resistance_at(platinum, 200.0) == Approx(175.86).margin(0.005));
  platinum.lead_ohm = 0.4;
  CHECK(resistance_at(platinum, 0.0) == Approx(100.4));
  // Beta's definition: at 25 degC r25; the ratio of two resistances is exp(beta (1/T1 - 1/T2)).
  ResistanceSensor beta;
  beta.r25_ohm = 10e3;
  beta.beta_k = 3950.0;
  CHECK(resistance_at(beta, 25.0) == Approx(10e3).epsilon(1e-12));
  CHECK(std::log(resistance_at(beta, 50.0) / resistance_at(beta, 80.0)) ==
        Approx(3950.0 * (1.0 / 323.15 - 1.0 / 353.15)).epsilon(1e-12));
  // Steinhart and Hart: what comes out fulfils their equation.
  ResistanceSensor three;
  three.a = 1.1e-3;
  three.b = 2.4e-4;
  three.c = 7.5e-8;
  for (const double t : {-30.0, 0.0, 25.0, 60.0, 120.0}) {
    const double x = std::log(resistance_at(three, t));
    CHECK(1.0 / (three.a + three.b * x + three.c * x * x * x) == Approx(t + 273.15).epsilon(1e-10));
  }
}

TEST_CASE("a thermometer read in ohms has its own error inside the declared class", "[rehearsal]") {
  double largest_k = 0.0;
  for (std::uint64_t seed = 1; seed <= 200; ++seed) {
    MeterDescription d;
    d.name = "reader";
    MeterFunction f;
    f.name = "ohms";
    f.quantity = Quantity::ambient_temperature;
    f.sensor = ResistanceSensor{};
    f.sensor->r0_ohm = 100.0;
    f.sensor->tolerance_k = 0.3;
    f.sensor->tolerance_per_k = 0.005;
    d.functions = {f};
    const Meter meter{d, seed, 1};
    History history{0.02, 2.0};
    PlantStep step;
    step.ambient_c = 100.0;
    for (int i = 0; i < 100; ++i) history.push(step);
    // About 0.379 ohm per kelvin at 100 degC (IEC 60751, the derivative of its equation).
    const double error_k = (meter.shown(history, 1.5)[0].value - 138.5055) / (0.39083 - 2.0 * 5.775e-3);
    CHECK(std::abs(error_k) <= 0.8 + 0.001);
    largest_k = std::max(largest_k, std::abs(error_k));
  }
  CHECK(largest_k > 0.7);
}

TEST_CASE("a wattmeter's power follows its circuits, inside the power's own specification", "[rehearsal]") {
  const double promised = GENERATE(0.1, 0.16, 0.3);
  CAPTURE(promised);
  PlantStep step;
  step.output.voltage[1] = {0.0, 230.0 * 230.0, 0.0};
  step.output.meter_current = {0.0, 4.0, 0.0};
  step.output.meter_power_w[1] = 460.0;
  History history{0.02, 2.0};
  for (int i = 0; i < 100; ++i) history.push(step);
  double product = 0.0, power_square = 0.0, sum_square = 0.0, largest = 0.0;
  for (std::uint64_t seed = 1; seed <= 400; ++seed) {
    MeterDescription d;
    d.name = "wattmeter";
    d.power_from_circuits = true;
    for (const Quantity quantity : {Quantity::voltage, Quantity::current, Quantity::power}) {
      MeterFunction f;
      f.name = quantity == Quantity::voltage ? "v" : quantity == Quantity::current ? "i" : "p";
      f.quantity = quantity;
      f.port = Port::output;
      f.response = Response::true_rms_ac_dc;
      f.ranges = {{1000.0, 0.0, quantity == Quantity::power ? promised : 0.08, 0.0, 0.0, 0.0}};
      d.functions.push_back(f);
    }
    const auto shown = Meter{d, seed, 1}.shown(history, 1.5);
    const double sum = shown[0].value / 230.0 - 1.0 + (shown[1].value / 2.0 - 1.0);
    const double power = shown[2].value / 460.0 - 1.0;
    CHECK(std::abs(power) <= 0.01 * promised + 1e-12);
    // Where the two together may be more than is promised, the power is scaled and has no part of its own.
    if (promised <= 0.16) CHECK(power == Approx(sum * promised / 0.16).margin(1e-12));
    product += power * sum;
    power_square += power * power;
    sum_square += sum * sum;
    largest = std::max(largest, std::abs(power));
  }
  const double correlation = product / std::sqrt(power_square * sum_square);
  // Own part: rectangular of half-width 0.14 beside two of 0.08: variance shares 0.0196 to 0.0128.
  if (promised > 0.16) CHECK(correlation == Approx(std::sqrt(0.0128 / 0.0324)).margin(0.12));
  CHECK(largest > 0.5 * 0.01 * promised);
}

}  // namespace
}  // namespace loadstair::rehearsal
