// Recorded runs with answers in closed form.
#include <catch2/catch.hpp>
#include <limits>

#include "analysis/base/number.h"
#include "hand_bench.h"

using namespace loadstair;
using namespace loadstair::evaluation;
using namespace loadstair::evaluation_tests;

namespace {

/// Two-sided 95 % of the normal distribution (any table of it).
constexpr double kNormal95 = 1.959963984540054;

bool mentions(const std::vector<std::string>& remarks, const std::string& what) {
  for (const std::string& remark : remarks) {
    if (remark.find(what) != std::string::npos) return true;
  }
  return false;
}

void check_no_nan(const RunResult& result) {
  each_quantity(result, [](const std::string& name, const Quantity& quantity) {
    INFO(name << ": " << quantity.why);
    CHECK(std::isfinite(quantity.value));
    CHECK(std::isfinite(quantity.low));
    CHECK(std::isfinite(quantity.high));
    CHECK((quantity.known || !quantity.why.empty()));
    CHECK((!quantity.known || quantity.uncertainty_known || !quantity.why.empty()));
    CHECK((!quantity.known || !quantity.uncertainty_known ||
           (quantity.low <= quantity.value && quantity.value <= quantity.high)));
  });
}

}  // namespace

TEST_CASE("38.5 W out of 39.9 W in is 96.5 %, with the interval that four meters give") {
  // The figures are the trade's: "38.5 W out at 96.5 % means 39.9 W in" (common practice, no source).
  const RunResult result = stoat_bench().evaluate();
  const StepResult& step = result.steps.at(0);
  CHECK(step.result_state == "measured");
  CHECK(step.input_power.value == Approx(39.9).epsilon(1e-12));
  CHECK(step.output_power.value == Approx(38.5).epsilon(1e-12));
  CHECK(step.efficiency.value == Approx(38.5 / 39.9).epsilon(1e-12));
  CHECK(step.efficiency.value == Approx(0.965).margin(0.0005));
  CHECK(step.loss.value == Approx(1.4).epsilon(1e-10));

  // Four independent gains of +-0.5 %, rectangular: JCGM 100:2008 4.3.7 and 5.1.6.
  const double relative = std::sqrt(4.0) * 0.005 / std::sqrt(3.0);
  CHECK((step.efficiency.high - step.efficiency.low) / 2.0 ==
        Approx(kNormal95 * relative * 38.5 / 39.9).epsilon(1e-9));
  REQUIRE(step.efficiency.k);
  CHECK(*step.efficiency.k == Approx(kNormal95).epsilon(1e-9));
  // The loss: powers of 39.9 and 38.5 W, each with two gains.
  const double loss_u = std::hypot(39.9, 38.5) * std::sqrt(2.0) * 0.005 / std::sqrt(3.0);
  CHECK(*step.loss.expanded == Approx(kNormal95 * loss_u).epsilon(1e-9));
  CHECK(step.efficiency.unit == "1");
  CHECK(result.curve.size() == 1);
  CHECK(result.state == "done");
  check_no_nan(result);
}

TEST_CASE("the shares of the budget sum to 1, and its largest line has an action") {
  HandBench bench =
      stoat_bench({.reading_percent = 0.05, .range_percent = 0.02, .upto = 60.0, .resolution = 0.001});
  // A rectangle rules here, so that Monte Carlo's interval would be quoted; a budget is of the linear one.
  CHECK(bench.evaluate().steps.at(0).efficiency.method == "monte-carlo");
  const RunResult result = evaluation::evaluate(bench.run, bench.hookup, bench.stair, Validate::no);
  const StepResult& step = result.steps.at(0);
  double sum = 0.0;
  double last = 1.0;
  for (const BudgetEntry& entry : step.budget) {
    sum += entry.share;
    CHECK(entry.share <= last);
    last = entry.share;
    if (entry.expanded_if_done) CHECK(*entry.expanded_if_done <= *step.efficiency.expanded);
  }
  CHECK(sum == Approx(1.0).epsilon(1e-12));
  // 0.83 A on a 60 A range: the offset dominates, and a smaller range would help.
  CHECK(step.budget.at(0).source == "input current meter dc current on 60 A: offset");
  CHECK(step.budget.at(0).action == "use a range nearer to the reading");
}

TEST_CASE("one meter moved between two ports is one source: its gain drops out") {
  HandBench bench = stoat_bench();
  for (const std::size_t i : {std::size_t{1}, std::size_t{3}}) {
    bench.hookup.channels[i].instrument = "A1";
  }
  const Quantity eta = bench.evaluate().steps.at(0).efficiency;
  // Two voltage gains as before; of the current only the per-level share of 0.1 is left, twice.
  const double u = 0.005 / std::sqrt(3.0);
  const double relative = std::sqrt(2.0 * u * u + 2.0 * 0.1 * u * u);
  REQUIRE(eta.expanded);
  CHECK(*eta.expanded == Approx(kNormal95 * relative * eta.value).epsilon(1e-9));
}

TEST_CASE("a declared repeatability replaces the default shares") {
  HandBench bench = stoat_bench();
  for (const std::size_t i : {std::size_t{1}, std::size_t{3}}) {
    bench.hookup.channels[i].instrument = "A1";
    bench.hookup.repeatability_percent[bench.hookup.channels[i].name] = 0.1;
  }
  const Quantity eta = bench.evaluate().steps.at(0).efficiency;
  // Unshared: (0.1/0.5)^2 of the variance, half of it per level, for either current.
  const double u = 0.005 / std::sqrt(3.0);
  const double relative = std::sqrt(2.0 * u * u + 2.0 * 0.04 / 2.0 * u * u);
  REQUIRE(eta.expanded);
  CHECK(*eta.expanded == Approx(kNormal95 * relative * eta.value).epsilon(1e-9));
}

TEST_CASE("a shunt: its warm resistance, its tolerance, its share") {
  HandBench bench = stoat_bench({.reading_percent = 0.0, .upto = 1000.0});
  setup::Channel& current = bench.hookup.channels[1];
  current.conversion.shunt = setup::Shunt{0.1, 0.5, 200.0, 20.0};
  const double voltage = 0.0831;
  store::StoredChannel& stored = bench.stored("input current");
  for (double& value : stored.value) value = voltage;
  const StepResult step = bench.evaluate().steps.at(0);
  // v = i R (1 + alpha theta v i): a quadratic for i.
  const double q = 200e-6 * 20.0 * voltage;
  const double a = 0.1 * q;
  const double i = (-0.1 + std::sqrt(0.01 + 4.0 * a * voltage)) / (2.0 * a);
  CHECK(step.ports.at(0).current.value == Approx(i).epsilon(1e-9));
  CHECK(step.input_power.value == Approx(48.0 * i).epsilon(1e-9));
  REQUIRE_FALSE(step.budget.empty());
  CHECK(step.budget.at(0).source == "shunt of input current: resistance");
  // 0.5 % tolerance against 200 ppm/K times 2 K and 30 % of its rise.
  const double rise = 20.0 * voltage * i;
  const double tolerance = 0.005;
  const double temperature = 200e-6 * (2.0 + 0.3 * rise);
  CHECK(step.budget.at(0).share ==
        Approx(tolerance * tolerance / (tolerance * tolerance + temperature * temperature)).epsilon(1e-3));
}

TEST_CASE("the meter on a shunt is no burden of its own: it is beside the shunt") {
  // Source - V - shunt - converter: at the terminals V - I (R || R_meter), with I = v/R + v/R_meter.
  HandBench bench = stoat_bench({.reading_percent = 0.0, .upto = 1000.0});
  setup::Channel& current = bench.hookup.channels[1];
  current.conversion.shunt = setup::Shunt{0.1};
  bench.hookup.ports[0].voltmeter = setup::VoltmeterSide::outer;
  bench.hookup.ports[0].sensed = false;
  for (double& value : bench.stored("input current").value) value = 0.08;
  SECTION("10 Mohm takes nothing worth seeing") {
    current.ranges[0].impedance_ohm = 10e6;
    const auto& port = bench.evaluate().steps.at(0).ports.at(0);
    CHECK(port.current.value == Approx(0.8).epsilon(2e-8));
    CHECK(port.voltage.value == Approx(47.92).epsilon(1e-9));
  }
  SECTION("20 ohm takes half a percent of the current, known to 10 %") {
    current.ranges[0].impedance_ohm = 20.0;
    current.ranges[0].impedance_tolerance_percent = 10.0;
    const auto& port = bench.evaluate().steps.at(0).ports.at(0);
    CHECK(port.current.value == Approx(0.8 + 0.08 / 20.0).epsilon(1e-12));
    CHECK(port.voltage.value == Approx(48.0 - 0.08).epsilon(1e-12));
    CHECK(*port.current.expanded == Approx(kNormal95 * 0.004 * 0.1 / std::sqrt(3.0)).epsilon(1e-6));
  }
}

TEST_CASE("volts and amps of an AC port are apparent power only") {
  HandBench bench = stoat_bench();
  bench.hookup.ports[1].kind = setup::PortKind::ac;
  bench.hookup.channels[2].response = setup::Response::true_rms_ac;
  bench.hookup.channels[3].response = setup::Response::true_rms_ac;
  SECTION("without a power factor there is no efficiency") {
    const RunResult result = bench.evaluate();
    const StepResult& step = result.steps.at(0);
    CHECK(step.result_state == "apparent power only");
    CHECK(step.ports.at(1).state == "apparent power only");
    CHECK(step.ports.at(1).apparent_power.value == Approx(38.5));
    CHECK_FALSE(step.efficiency.known);
    CHECK(step.efficiency.why.find("apparent power only") != std::string::npos);
    CHECK(step.budget.empty());
    CHECK(step.input_power.known);
    CHECK(result.curve.empty());
    check_no_nan(result);
  }
  SECTION("a power factor declared as [0.9, 1] gives 0.95 with its bound") {
    bench.hookup.ports[1].power_factor_low = 0.9;
    const RunResult result = bench.evaluate();
    const StepResult& step = result.steps.at(0);
    CHECK(step.output_power.value == Approx(38.5 * 0.95).epsilon(1e-12));
    const double gains = std::sqrt(2.0) * 0.005 / std::sqrt(3.0);
    const double relative = std::hypot(gains, 0.05 / 0.95 / std::sqrt(3.0));
    CHECK(*step.output_power.expanded == Approx(kNormal95 * relative * 38.5 * 0.95).epsilon(1e-9));
    CHECK(step.budget.at(0).action == "take a capture in this step");
  }
  SECTION("an average-responding meter without form factor: a value, but no uncertainty, no curve") {
    bench.hookup.ports[1].power_factor_low = 0.9;
    bench.hookup.channels[2].response = setup::Response::average_responding;
    const RunResult result = bench.evaluate();
    const StepResult& step = result.steps.at(0);
    CHECK(step.efficiency.known);
    CHECK_FALSE(step.efficiency.uncertainty_known);
    CHECK(step.efficiency.why.find("average-responding") != std::string::npos);
    CHECK(result.curve.empty());
  }
}

TEST_CASE("accuracy that nobody declared: values, and \"uncertainty not known\"") {
  HandBench bench = stoat_bench();
  bench.hookup.channels[3].ranges.clear();
  const RunResult result = bench.evaluate();
  const StepResult& step = result.steps.at(0);
  CHECK(step.result_state == "uncertainty not known");
  CHECK(step.efficiency.known);
  CHECK_FALSE(step.efficiency.uncertainty_known);
  CHECK(step.efficiency.value == Approx(38.5 / 39.9));
  CHECK(step.efficiency.why.find("output current: uncertainty not known: no accuracy is declared") == 0);
  CHECK(step.input_power.uncertainty_known);
  CHECK(step.budget.empty());
  CHECK(result.curve.empty());
  check_no_nan(result);
}

TEST_CASE("beyond the largest declared range nothing is known of the error") {
  HandBench bench = stoat_bench({.upto = 30.0});
  const StepResult step = bench.evaluate().steps.at(0);
  CHECK(step.result_state == "uncertainty not known");
  CHECK(step.efficiency.why.find("input voltage: uncertainty not known: read beyond the largest range") == 0);
}

TEST_CASE("a meter that changes its range within the window has the sources of both") {
  HandBench bench = stoat_bench({.reading_percent = 0.0});
  setup::Channel& current = bench.hookup.channels[3];
  current.ranges.clear();
  current.ranges.push_back({.upto = 4.0, .reading_percent = 0.5});
  current.ranges.push_back({.upto = 20.0, .reading_percent = 1.0});
  store::StoredChannel& stored = bench.stored("output current");
  for (std::size_t i = 0; i < stored.range.size(); ++i) stored.range[i] = i < 10 ? 20.0 : 4.0;
  const StepResult step = bench.evaluate().steps.at(0);
  // A fifth of the readings at +-1 %, the rest at +-0.5 %, independent but for the per-level share, which
  // belongs to its range as well.
  const double relative = std::hypot(0.2 * 0.01, 0.8 * 0.005) / std::sqrt(3.0);
  CHECK(*step.output_power.expanded == Approx(kNormal95 * relative * 38.5).epsilon(1e-9));
  CHECK(mentions(step.remarks, "output current: the meter changed its range"));
}

TEST_CASE("readings that must not be used change nothing but the remarks") {
  const std::string clean = fingerprint(stoat_bench().evaluate());
  for (const std::uint32_t flag : {instrument::kOverload, instrument::kInvalid, instrument::kStale,
                                   instrument::kUnitChanged, instrument::kSuperseded, instrument::kMissing}) {
    HandBench bench = stoat_bench();
    for (const char* channel : {"input voltage", "input current", "output voltage", "output current"}) {
      for (int i = 0; i < 7; ++i) {
        const double wild = flag == instrument::kStale || flag == instrument::kUnitChanged
                                ? 1e9
                                : std::numeric_limits<double>::quiet_NaN();
        bench.read(channel, kStart + 12 * kSecond + i * kSecond + 50'000'000, wild, flag);
      }
    }
    const RunResult result = bench.evaluate();
    CHECK(fingerprint(result) == clean);
    CHECK(mentions(result.steps.at(0).remarks, "7 of 57 readings not used"));
  }
}

TEST_CASE("readings outside the averaging window change nothing") {
  HandBench bench = stoat_bench();
  for (const char* channel : {"input voltage", "output current"}) {
    bench.read(channel, kStart + 9 * kSecond, 1000.0);
    bench.read(channel, kStart + 21 * kSecond, 1000.0);
  }
  CHECK(fingerprint(bench.evaluate()) == fingerprint(stoat_bench().evaluate()));
}

TEST_CASE(
    "a reading at the window's edge may be of the next set point: what is not wholly inside is left out") {
  HandBench bench = stoat_bench();
  bench.hookup.instruments[3].integration_s = 0.1;
  // Half-width 20 ms and half the integration 50 ms: 60 ms from the edge is too near, 80 ms is not.
  bench.read("output current", kStart + 10 * kSecond + 60'000'000, 1.0);
  bench.read("output current", kStart + 20 * kSecond - 60'000'000, 1.0);
  CHECK(bench.evaluate().steps.at(0).output_power.value == Approx(38.5).epsilon(1e-12));
  bench.read("output current", kStart + 20 * kSecond - 80'000'000, 1.0);
  CHECK(bench.evaluate().steps.at(0).output_power.value < 38.4);
}

TEST_CASE("whatever channel is missing, every result has a value or a reason") {
  for (const char* dropped : {"input voltage", "input current", "output voltage", "output current"}) {
    for (const bool flagged : {false, true}) {
      HandBench bench = stoat_bench();
      store::StoredChannel& stored = bench.stored(dropped);
      if (flagged) {
        for (std::uint32_t& flags : stored.flags) flags = instrument::kOverload;
      } else {
        stored = store::StoredChannel{.entry = stored.entry};
      }
      const RunResult result = bench.evaluate();
      const StepResult& step = result.steps.at(0);
      INFO(dropped << ": " << step.efficiency.why);
      CHECK_FALSE(step.efficiency.known);
      CHECK(step.result_state.find("missing channel " + std::string{dropped}) == 0);
      CHECK(step.efficiency.why.find(dropped) != std::string::npos);
      CHECK(step.efficiency.why.find(flagged ? "overload" : "no reading") != std::string::npos);
      const bool input = std::string{dropped}.find("input") == 0;
      CHECK(step.input_power.known == !input);
      CHECK(step.output_power.known == input);
      check_no_nan(result);
    }
  }
}

TEST_CASE("one reading says nothing of its fluctuation, two give a bound") {
  for (const int kept : {1, 2, 5}) {
    HandBench bench = stoat_bench();
    store::StoredChannel& stored = bench.stored("output current");
    for (std::size_t i = static_cast<std::size_t>(kept); i < stored.flags.size(); ++i)
      stored.flags[i] = instrument::kStale;
    const RunResult result = bench.evaluate();
    check_no_nan(result);
    CHECK(result.steps.at(0).efficiency.known == (kept > 1));
    if (kept == 1) CHECK(result.steps.at(0).efficiency.why.find("too few readings") != std::string::npos);
  }
}

TEST_CASE("noise of the output alone: its Type A, and none of a load that drifts in step") {
  HandBench bench = stoat_bench({.reading_percent = 0.0});
  const int step = 0;
  store::StoredChannel& stored = bench.stored("output current");
  stored = store::StoredChannel{.entry = stored.entry};
  // Alternating by s about the mean: no positive correlation, so N_eff = N; u^2 = sum r^2 / (N (N - 1)). The
  // line takes 2/N of that away: 1e-2 covers it.
  const double s = 1e-3;
  bench.read_window("output current", step,
                    [&](int i) { return 38.5 / 12.0 * (1.0 + (i % 2 == 0 ? s : -s)); });
  const Quantity eta = bench.evaluate().steps.at(0).efficiency;
  const double u = s / std::sqrt(kReadings - 1.0) * eta.value;
  // Student's t for 49 degrees of freedom, 95 %: 2.0096 (JCGM 100:2008 table G.2 has 2.01 for 50).
  CHECK((eta.high - eta.low) / 2.0 == Approx(2.0096 * u).epsilon(1e-2));

  HandBench drifting = stoat_bench({.reading_percent = 0.0});
  for (const char* channel : {"input current", "output current"}) {
    for (std::size_t i = 0; i < kReadings; ++i)
      drifting.stored(channel).value[i] *= 1.0 + 1e-4 * static_cast<double>(i);
  }
  const StepResult steady = drifting.evaluate().steps.at(0);
  // The powers drift by 0.5 % over the window, the efficiency does not.
  CHECK(*steady.output_power.expanded > 0.001 * steady.output_power.value);
  // Whichever of the linear interval and Monte Carlo's is quoted.
  CHECK((steady.efficiency.high - steady.efficiency.low) / 2.0 < 1e-4);
  CHECK(steady.efficiency.value == Approx(38.5 / 39.9).epsilon(1e-9));
}

TEST_CASE("burden: a voltmeter left across a 40 W output changes the efficiency read") {
  HandBench bench = stoat_bench({.reading_percent = 0.0});
  bench.hookup.channels[2].ranges[0].impedance_ohm =
      1000.0;  // 12 V across 1 kohm: 0.144 W beside the ammeter
  const StepResult step = bench.evaluate().steps.at(0);
  CHECK(step.output_power.value == Approx(38.5 + 0.144).epsilon(1e-9));
  CHECK(step.ports.at(1).corrections.size() == 1);
  // +-30 % of it where no tolerance is declared.
  CHECK(*step.output_power.expanded == Approx(kNormal95 * 0.3 * 0.144 / std::sqrt(3.0)).epsilon(1e-6));
}

TEST_CASE("steps without a window say why, and the rest of the run stands") {
  HandBench bench = stoat_bench();
  const int skipped = bench.step("80 W", 80.0);
  bench.run.steps[static_cast<std::size_t>(skipped)].average_begin_ns.reset();
  bench.run.steps[static_cast<std::size_t>(skipped)].average_end_ns.reset();
  bench.run.steps[static_cast<std::size_t>(skipped)].state = store::StepState::skipped;
  bench.run.steps[static_cast<std::size_t>(skipped)].reason = "guard heatsink too hot";
  const RunResult result = bench.evaluate();
  CHECK(result.steps.at(0).efficiency.known);
  CHECK(result.steps.at(1).result_state == "not measured");
  CHECK(result.steps.at(1).efficiency.why == "not measured: guard heatsink too hot");
  CHECK(result.curve.size() == 1);
  check_no_nan(result);
}

namespace {

/// 12 V, 38.5/12 A and 30.8 W from one wattmeter, each function within 0.1 % of reading.
HandBench wattmeter_bench() {
  HandBench bench = stoat_bench({.reading_percent = 0.0});
  setup::Port& output = bench.hookup.ports[1];
  output.kind = setup::PortKind::ac;
  output.power = "output power";
  bench.link("output power", setup::Quantity::power, "W", {.reading_percent = 0.1, .upto = 1500.0}).response =
      setup::Response::wattmeter;
  bench.read_window("output power", 0, 30.8);
  for (const std::size_t i : {std::size_t{2}, std::size_t{3}, std::size_t{4}}) {
    setup::Channel& channel = bench.hookup.channels[i];
    channel.ranges[0].reading_percent = 0.1;
    channel.instrument = "output wattmeter";
    channel.value = i == 2 ? "voltage" : i == 3 ? "current" : "power";
    if (i < 4) channel.response = setup::Response::true_rms_ac_dc;
  }
  return bench;
}

}  // namespace

TEST_CASE("a wattmeter's voltage, current and power share their gains within their specifications") {
  const StepResult step = wattmeter_bench().evaluate().steps.at(0);
  REQUIRE(step.power_factor.known);
  CHECK(step.power_factor.value == Approx(0.8).epsilon(1e-12));
  // Closed form. Nine tenths of each variance are gains. The power's gain is s (g_V + g_I) with s = 1/sqrt 2,
  // so that its own variance is what its limits say; of P/(V I) then stays (s - 1)(g_V + g_I), and the three
  // tenths that are new at every level.
  const double u = 0.001 / std::sqrt(3.0);
  const double left = 1.0 - 1.0 / std::sqrt(2.0);
  const double relative = u * std::sqrt(0.9 * 2.0 * left * left + 3.0 * 0.1);
  CHECK(*step.power_factor.expanded == Approx(kNormal95 * relative * 0.8).epsilon(1e-9));
  CHECK(*step.output_power.expanded == Approx(kNormal95 * u * 30.8).epsilon(1e-9));
}

TEST_CASE("what no specification promises is not asked of a wattmeter's own numbers") {
  // P lies this far off V I PF, a product of independent errors: 0.196 % at 95 %. Shared gains would explain
  // 0.08 % only.
  for (const double off : {0.0013, 0.0030}) {
    HandBench bench = wattmeter_bench();
    bench.link("power factor", setup::Quantity::power_factor, "1", {.reading_percent = 0.0, .upto = 1.0})
        .instrument = "output wattmeter";
    bench.hookup.ports[1].power_factor = "power factor";
    bench.read_window("power factor", 0, 0.8 / (1.0 + off));
    const RunResult result = bench.evaluate();
    INFO(off);
    CHECK(mentions(result.steps.at(0).remarks, "check wiring") == (off > 0.002));
  }
}

TEST_CASE("a wattmeter's phase error counts as P tan(phi) u(phi)") {
  HandBench bench = wattmeter_bench();
  for (const std::size_t i : {std::size_t{2}, std::size_t{3}, std::size_t{4}})
    bench.hookup.channels[i].ranges[0].reading_percent = 0.0;
  bench.hookup.channels[4].phase_error_deg = 0.05;
  const StepResult step = bench.evaluate().steps.at(0);
  // PF 0.8: tan(phi) = 0.75.
  const double u = 30.8 * 0.75 * 0.05 * std::acos(-1.0) / 180.0 / std::sqrt(3.0);
  CHECK(*step.output_power.expanded == Approx(kNormal95 * u).epsilon(1e-9));
}

TEST_CASE("two steps of one label keep their noise apart, and meters at two levels share their gain") {
  HandBench bench = stoat_bench();
  const int again = bench.step("40 W", 40.0);
  bench.read_window("input voltage", again, 48.0);
  bench.read_window("input current", again, 39.9 / 48.0);
  bench.read_window("output voltage", again, 12.0);
  bench.read_window("output current", again,
                    [](int i) { return 38.5 / 12.0 * (i % 2 == 0 ? 1.0001 : 0.9999); });
  const RunResult result = bench.evaluate();
  bool named = false;
  for (const BudgetEntry& entry : result.steps.at(1).budget) {
    named = named || entry.source == "noise in the window of 40 W (step 2)";
  }
  CHECK(named);
  // Correlation of the two efficiencies: all but the per-level tenth of the gains is common.
  REQUIRE(result.points.size() == 2);
  CHECK(estimate::correlation(result.points[0].efficiency, result.points[1].efficiency) ==
        Approx(0.9).epsilon(1e-3));
}

TEST_CASE("amendments that were not applied are told") {
  HandBench bench = stoat_bench();
  bench.hookup.text = bench.run.hookup_text = "{}";
  bench.run.amendments.emplace_back();
  CHECK(mentions(bench.evaluate().remarks, "1 amendments of this run are not applied"));
  bench.hookup.text = "{ }";
  CHECK_FALSE(mentions(bench.evaluate().remarks, "amendments"));
}

TEST_CASE("the same record gives the same bits") {
  CHECK(fingerprint(stoat_bench().evaluate()) == fingerprint(stoat_bench().evaluate()));
}
