// What an inverter's step shows besides efficiency: capture results, temperatures, weighted figures.
#include <algorithm>
#include <catch2/catch.hpp>
#include <limits>
#include <numbers>

#include "analysis/base/number.h"
#include "hand_bench.h"

using namespace loadstair;
using namespace loadstair::evaluation;
using namespace loadstair::evaluation_tests;

namespace {

constexpr double kNormal95 = 1.959963984540054;
constexpr double kThird = 0.03;  ///< third harmonic over the fundamental

/// 230 V, 50 Hz, with a third harmonic in phase at the crest's opposite: the peak is 1 + kThird of the sine's
/// where sin(3x) = -1 at x = 90 degrees.
std::string capture_file() {
  std::string text = "time (s),output voltage (V),output current (A)\n";
  constexpr int kPerCycle = 400;
  for (int k = 0; k < 10 * kPerCycle; ++k) {
    const double x = 2.0 * std::numbers::pi * k / kPerCycle;
    const double v = 230.0 * std::numbers::sqrt2 * (std::sin(x) - kThird * std::sin(3.0 * x));
    const double i = 2.0 * std::numbers::sqrt2 * std::sin(x - std::numbers::pi / 3.0);
    text += base::print_number(k * 0.02 / kPerCycle) + "," + base::print_number(v) + "," +
            base::print_number(i) + "\n";
  }
  return text;
}

/// Losses of p0 + p1 P + p2 P^2.
constexpr double kP0 = 6.0, kP1 = 0.02, kP2 = 2e-5;
double input_of(double output_w) {
  return output_w + kP0 + kP1 * output_w + kP2 * output_w * output_w;
}

HandBench inverter_bench(const std::vector<double>& loads_w) {
  HandBench bench;
  bench.hookup.channels.reserve(16);
  bench.stair.ratings = {385.0, 230.0, 600.0, 50.0, 45.0};
  bench.link("input voltage", setup::Quantity::voltage, "V", {.reading_percent = 0.05});
  bench.link("input current", setup::Quantity::current, "A", {.reading_percent = 0.05});
  bench.link("output power", setup::Quantity::power, "W", {.reading_percent = 0.1, .upto = 1500.0});
  bench.hookup.channels.back().response = setup::Response::wattmeter;
  bench.link("heatsink", setup::Quantity::temperature, "degC", {.reading_percent = 0.0, .upto = 400.0});
  bench.hookup.channels.back().conversion.thermocouple = setup::Thermocouple{'K', 1, ""};
  bench.hookup.temperatures.push_back({"heatsink", "beside the bridge", ""});
  setup::Port& input = bench.port("input", setup::Direction::input);
  input.voltage = "input voltage";
  input.current = "input current";
  setup::Port& output = bench.port("output", setup::Direction::output, setup::PortKind::ac);
  output.power = "output power";
  for (const double load_w : loads_w) {
    const int step = bench.step(base::print_number(load_w) + " W", load_w);
    bench.read_window("input voltage", step, 385.0);
    bench.read_window("input current", step, input_of(load_w) / 385.0);
    bench.read_window("output power", step, load_w);
    bench.read_window("heatsink", step, 23.0 + load_w / 20.0);
  }
  return bench;
}

void add_capture(HandBench& bench, double gain_percent) {
  setup::CaptureSource source;
  source.instrument = "scope";
  source.voltage_column = "output voltage";
  source.current_column = "output current";
  source.voltage_gain_percent = source.current_gain_percent = gain_percent;
  source.delay_tolerance_s = 1e-6;
  source.port = "output";
  bench.hookup.captures.push_back(source);
  store::StoredCapture capture;
  capture.step = 0;
  capture.instrument = "scope";
  capture.file_name = "step_0.csv";
  capture.t_ns = kStart + 21 * kSecond;  // after the window of step 0
  capture.bytes = capture_file();
  capture.size = static_cast<std::int64_t>(capture.bytes.size());
  bench.run.captures.push_back(capture);
}

}  // namespace

TEST_CASE("distortion, crest factor and frequency come from the step's capture") {
  HandBench bench = inverter_bench({300.0});
  add_capture(bench, 2.0);
  const StepResult step = bench.evaluate().steps.at(0);
  REQUIRE(step.thd_voltage.known);
  CHECK(step.thd_voltage.value == Approx(kThird).epsilon(1e-6));
  // Peak sqrt 2 (1 + 0.03) over RMS sqrt(1 + 0.03^2).
  REQUIRE(step.crest_factor.known);
  CHECK(step.crest_factor.value ==
        Approx(std::numbers::sqrt2 * (1.0 + kThird) / std::sqrt(1.0 + kThird * kThird)).epsilon(1e-6));
  CHECK(step.crest_factor.uncertainty_known);
  CHECK(step.frequency.value == Approx(50.0).epsilon(1e-6));
}

TEST_CASE("a capture whose accuracy nobody declared gives values that enter nothing") {
  HandBench bench = inverter_bench({300.0});
  bench.hookup.ports[1].power.clear();
  add_capture(bench, 0.0);
  const RunResult result = bench.evaluate();
  const StepResult& step = result.steps.at(0);
  CHECK(step.thd_voltage.known);
  CHECK_FALSE(step.thd_voltage.uncertainty_known);
  CHECK_FALSE(step.thd_voltage.why.empty());
  CHECK_FALSE(step.efficiency.known);
  CHECK(result.curve.empty());
}

TEST_CASE("without a wattmeter the capture's active power is the output: V I cos 60 degrees") {
  HandBench bench = inverter_bench({300.0});
  bench.hookup.ports[1].power.clear();
  add_capture(bench, 2.0);
  const StepResult step = bench.evaluate().steps.at(0);
  CHECK(step.ports.at(1).method == "capture");
  CHECK(step.output_power.value == Approx(230.0 * 2.0 * 0.5).epsilon(1e-6));
  // Two gains of 2 %, and 1 us of delay at tan 60 degrees: 314e-6 * 1.732.
  const double gains = std::sqrt(2.0) * 0.02;
  const double delay = 2.0 * std::numbers::pi * 50.0 * 1e-6 * std::sqrt(3.0);
  CHECK(*step.output_power.expanded ==
        Approx(kNormal95 * std::hypot(gains, delay) / std::sqrt(3.0) * 230.0).epsilon(0.01));
}

TEST_CASE("a file that is no capture is told, and costs only what it would have given") {
  HandBench bench = inverter_bench({300.0});
  add_capture(bench, 2.0);
  const std::string whole = bench.run.captures[0].bytes;
  for (const std::string& bytes : {std::string{}, std::string{"hello"}, whole.substr(0, 500)}) {
    bench.run.captures[0].bytes = bytes;
    const StepResult step = bench.evaluate().steps.at(0);
    CHECK(step.efficiency.known);
    CHECK_FALSE(step.thd_voltage.known);
    CHECK_FALSE(step.thd_voltage.why.empty());
    CHECK_FALSE(step.crest_factor.why.empty());
  }
}

TEST_CASE("a capture from before the averaging window is told, never used; of the others the last counts") {
  HandBench bench = inverter_bench({300.0});
  add_capture(bench, 2.0);
  store::StoredCapture& good = bench.run.captures[0];
  SECTION("an early file beside a good one, wherever it stands in the list") {
    store::StoredCapture early = good;
    early.file_name = "early.csv";
    early.t_ns = kStart + 7 * kSecond + kSecond / 2;  // the window begins at 10 s
    early.bytes = "hello";
    early.size = 5;
    bench.run.captures.push_back(early);
    const StepResult step = bench.evaluate().steps.at(0);
    CHECK(step.thd_voltage.value == Approx(kThird).epsilon(1e-6));
    REQUIRE_FALSE(step.remarks.empty());
    CHECK(std::count(step.remarks.begin(), step.remarks.end(),
                     "capture not used: early.csv came 2.50 s before the averaging window began, when the "
                     "step had not settled") == 1);
  }
  SECTION("an early file alone gives nothing") {
    good.t_ns = kStart + 10 * kSecond - 1;
    const StepResult step = bench.evaluate().steps.at(0);
    CHECK_FALSE(step.thd_voltage.known);
    CHECK(step.efficiency.known);
  }
  SECTION("a file at the window's first instant counts, until a later one comes") {
    store::StoredCapture later = good;
    later.bytes = "hello";
    later.size = 5;
    good.t_ns = kStart + 10 * kSecond;
    CHECK(bench.evaluate().steps.at(0).thd_voltage.known);
    bench.run.captures.insert(bench.run.captures.begin(), later);
    CHECK_FALSE(bench.evaluate().steps.at(0).thd_voltage.known);
  }
}

TEST_CASE("the end temperature as measured, with its junction's class") {
  const StepResult step = inverter_bench({300.0}).evaluate().steps.at(0);
  REQUIRE(step.temperatures.size() == 1);
  const TemperatureResult& heatsink = step.temperatures[0];
  CHECK(heatsink.place == "beside the bridge");
  CHECK(heatsink.how == "measured");
  CHECK(heatsink.end.value == Approx(38.0).epsilon(1e-9));
  // IEC 60584-1:2013, type K class 1 from -40 to 375 degC: +-1.5 K; rectangular.
  CHECK((heatsink.end.high - heatsink.end.low) / 2.0 ==
        Approx(kNormal95 * 1.5 / std::sqrt(3.0)).epsilon(1e-6));
}

TEST_CASE("a bare thermocouple: its cold junction counts as emf, with its own uncertainty") {
  HandBench bench = inverter_bench({300.0});
  setup::Channel& heatsink = bench.hookup.channels[3];
  heatsink.conversion.thermocouple = setup::Thermocouple{'K', 1, "block"};
  heatsink.ranges[0] = {.upto = 0.1};
  bench.link("block", setup::Quantity::temperature, "degC", {.reading_percent = 2.0, .upto = 100.0});
  bench.read_window("block", 0, 25.0);
  // Type K, mV: 4.096 at 100 degC, 1.000 at 25 degC (NIST Monograph 175, table of type K; three decimals).
  for (double& value : bench.stored("heatsink").value) value = 0.004096 - 0.001000;
  const TemperatureResult result = bench.evaluate().steps.at(0).temperatures.at(0);
  CHECK(result.end.value == Approx(100.0).margin(0.03));
  // Class 1: +-1.5 K. The block: +-0.5 K times the ratio of the emf's slopes at 25 and at 100 degC, 0.0405
  // mV/K over 0.0414 mV/K (the same table, differences of neighbouring degrees).
  const double expected = std::hypot(1.5, 0.5 * 0.0405 / 0.0414) / std::sqrt(3.0);
  CHECK((result.end.high - result.end.low) / 2.0 == Approx(kNormal95 * expected).epsilon(2e-3));
}

TEST_CASE("a predicted end temperature says so and holds what comes") {
  HandBench bench = inverter_bench({300.0, 600.0});
  setup::ThermalSettle settle;
  settle.channel = "heatsink";
  settle.change_k = 0.01;
  settle.window_s = 5.0;
  settle.by_prediction = true;
  settle.prediction_tolerance_k = 2.0;
  settle.slowest_tau_s = 5.0;
  for (setup::Step& step : bench.stair.steps) step.thermal = settle;
  bench.hookup.channels[3].conversion.thermocouple.reset();
  store::StoredChannel& heatsink = bench.stored("heatsink");
  heatsink = store::StoredChannel{.entry = heatsink.entry};
  Noise noise;
  for (int step = 0; step < 2; ++step) {
    for (int k = 0; k < 200; ++k) {
      const double t = 0.1 * k;
      bench.read("heatsink", kStart + step * kStepLength + k * std::int64_t{100'000'000} + 50'000'000,
                 60.0 - 37.0 * std::exp(-t / 5.0) + 0.05 * noise.next());
    }
  }
  const RunResult result = bench.evaluate();
  const TemperatureResult& first = result.steps.at(0).temperatures.at(0);
  CHECK(first.how == "predicted");
  CHECK(first.end.value == Approx(60.0).margin(0.3));
  CHECK(first.end.low <= 60.0);
  CHECK(first.end.high >= 60.0);
  // The last step of a run goes by rate: what is measured, and what may still come.
  const TemperatureResult& last = result.steps.at(1).temperatures.at(0);
  CHECK(last.how == "measured");
  CHECK(last.end.low <= 60.0);
  CHECK(last.end.high >= 60.0);
}

TEST_CASE("weighted efficiencies of a loss model in closed form") {
  // Levels of the rated AC power for CEC; the European ones lie on the DC side and come from the model.
  const std::vector<double> loads_w = {25.0, 60.0, 120.0, 180.0, 300.0, 450.0, 600.0};
  const RunResult result = inverter_bench(loads_w).evaluate();
  REQUIRE(result.curve.size() == loads_w.size());
  REQUIRE(result.weighted.size() == 2);
  const auto eta = [](double output_w) { return output_w / input_of(output_w); };

  const WeightedResult& cec = result.weighted[1];
  INFO(cec.efficiency.why);
  REQUIRE(cec.efficiency.known);
  // California Energy Commission: 4/5/12/21/53/5 % at 10/20/30/50/75/100 %.
  const double expected_cec = 0.04 * eta(60) + 0.05 * eta(120) + 0.12 * eta(180) + 0.21 * eta(300) +
                              0.53 * eta(450) + 0.05 * eta(600);
  CHECK(cec.efficiency.value == Approx(expected_cec).epsilon(1e-9));
  CHECK(cec.title.find("385 V") != std::string::npos);

  const WeightedResult& european = result.weighted[0];
  INFO(european.efficiency.why);
  REQUIRE(european.efficiency.known);
  // EN 50530: 3/6/13/10/48/20 % at 5/10/20/30/50/100 % of the rated DC power. Output for a DC power by the
  // quadratic.
  const double rated_dc = input_of(600.0);
  const auto eta_dc = [&](double share) {
    const double in = share * rated_dc;
    const double b = 1.0 + kP1;
    const double out = (-b + std::sqrt(b * b + 4.0 * kP2 * (in - kP0))) / (2.0 * kP2);
    return out / in;
  };
  const double expected = 0.03 * eta_dc(0.05) + 0.06 * eta_dc(0.1) + 0.13 * eta_dc(0.2) + 0.1 * eta_dc(0.3) +
                          0.48 * eta_dc(0.5) + 0.2 * eta_dc(1.0);
  CHECK(european.efficiency.value == Approx(expected).epsilon(2e-4));
  CHECK(european.efficiency.low < expected);
  CHECK(european.efficiency.high > expected);
}

TEST_CASE("a weighted figure that cannot be had says why") {
  const RunResult few = inverter_bench({300.0, 600.0}).evaluate();
  for (const WeightedResult& weighted : few.weighted) {
    CHECK_FALSE(weighted.efficiency.known);
    CHECK_FALSE(weighted.efficiency.why.empty());
  }
  const RunResult dc = stoat_bench().evaluate();
  REQUIRE(dc.weighted.size() == 2);
  CHECK(dc.weighted[0].efficiency.why.find("no AC output") != std::string::npos);
}

TEST_CASE("DC ripple without a capture: half the bound is corrected, the other half is uncertainty") {
  HandBench bench = stoat_bench({.reading_percent = 0.0});
  bench.hookup.ports[0].ripple_current_rms_a = 2.0;
  bench.hookup.ports[0].source_resistance_ohm = 0.1;
  const Quantity power = bench.evaluate().steps.at(0).input_power;
  // Between -R I^2 = -0.4 W and nothing (JCGM 100:2008 4.3.8).
  CHECK(power.value == Approx(39.9 - 0.2).epsilon(1e-9));
  CHECK(*power.expanded == Approx(kNormal95 * 0.2 / std::sqrt(3.0)).epsilon(1e-6));
}

TEST_CASE("DC ripple at an output: its sign is the load's, so the bound goes both ways") {
  HandBench bench = stoat_bench({.reading_percent = 0.0});
  bench.hookup.ports[1].ripple_current_rms_a = 2.0;
  bench.hookup.ports[1].source_resistance_ohm = 0.1;
  const Quantity power = bench.evaluate().steps.at(0).output_power;
  CHECK(power.value == Approx(38.5).epsilon(1e-12));
  CHECK(*power.expanded == Approx(kNormal95 * 0.4 / std::sqrt(3.0)).epsilon(1e-6));
}

TEST_CASE("the noise of a polled power factor is the power's, as a wattmeter's would be") {
  const auto noisy = [](int i) {
    Noise noise;
    for (int k = 0; k < i; ++k) (void)noise.next();
    return 0.9 * (1.0 + 0.01 * noise.next());
  };
  const auto bench_with = [&](bool wattmeter) {
    HandBench bench = stoat_bench({.reading_percent = 0.0});
    setup::Port& output = bench.hookup.ports[1];
    output.kind = setup::PortKind::ac;
    bench.hookup.channels[2].response = setup::Response::true_rms_ac;
    bench.hookup.channels[3].response = setup::Response::true_rms_ac;
    const Meter exact{.reading_percent = 0.0};
    if (wattmeter) {
      bench.link("power", setup::Quantity::power, "W", exact).response = setup::Response::wattmeter;
      output.power = "power";
      bench.read_window("power", 0, [&](int i) { return 38.5 * noisy(i); });
    } else {
      bench.link("power factor", setup::Quantity::power_factor, "1", exact);
      output.power_factor = "power factor";
      bench.read_window("power factor", 0, noisy);
    }
    return bench.evaluate().steps.at(0);
  };
  const StepResult read = bench_with(false);
  const StepResult same = bench_with(true);
  REQUIRE(read.efficiency.known);
  CHECK(read.ports.at(1).method == "V x I x PF");
  CHECK(read.efficiency.value == Approx(same.efficiency.value).epsilon(1e-12));
  REQUIRE(same.efficiency.expanded);
  REQUIRE(*same.efficiency.expanded > 1e-4);
  REQUIRE(read.efficiency.expanded);
  CHECK(*read.efficiency.expanded == Approx(*same.efficiency.expanded).epsilon(1e-9));
}
