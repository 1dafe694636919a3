// What a capture's source declares of its errors, and the direct component against the run's zeros.
#include "daemon/evaluation/capture_result.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <numbers>
#include <string>

#include "analysis/base/number.h"
#include "hand_bench.h"
#include "tests/analysis/random_source.h"

using namespace loadstair;
using namespace loadstair::evaluation;
using namespace loadstair::evaluation_tests;

namespace {

using Catch::Matchers::Contains;

constexpr double kPi = std::numbers::pi;

/// 10 cycles of `amplitude` sine about `mean` with a hundredth of 20th harmonic, current lagging by 60
/// degrees.
std::string capture_file(double amplitude, double mean, tests::RandomSource& random) {
  std::string text = "time (s),output voltage (V),output current (A)\n";
  constexpr int kPerCycle = 400;
  for (int k = 0; k < 10 * kPerCycle; ++k) {
    const double x = 2.0 * kPi * k / kPerCycle;
    const double v = amplitude * (std::sin(x) + 0.01 * std::sin(20.0 * x)) + mean + 0.2 * random.normal();
    const double i = 0.01 * amplitude * std::sin(x - kPi / 3.0) + 0.002 * random.normal();
    text += base::print_number(k * 0.02 / kPerCycle) + "," + base::print_number(v) + "," +
            base::print_number(i) + "\n";
  }
  return text;
}

setup::CaptureSource source() {
  setup::CaptureSource source;
  source.instrument = "scope";
  source.voltage_column = "output voltage";
  source.current_column = "output current";
  source.voltage_gain_percent = source.current_gain_percent = 1.0;
  source.port = "output";
  return source;
}

/// Zero, level, zero: each with a capture.
struct CapturedRun {
  HandBench bench;
  tests::RandomSource random{5};

  explicit CapturedRun(double zero_before = 0.30, double zero_after = 0.40) {
    bench.stair.ratings = {385.0, 230.0, 600.0, 50.0, 45.0};
    setup::Port& output = bench.port("output", setup::Direction::output, setup::PortKind::ac);
    output.voltage = "output voltage";
    bench.hookup.captures.push_back(source());
    for (const setup::StepKind kind :
         {setup::StepKind::zero, setup::StepKind::level, setup::StepKind::zero}) {
      const int step = bench.step("step", 0.0);
      bench.stair.steps.at(static_cast<std::size_t>(step)).kind = kind;
    }
    add(0, 1, capture_file(0.0, zero_before, random));
    add(1, 2, capture_file(325.0, 0.85, random));
    add(2, 3, capture_file(0.0, zero_after, random));
  }

  void add(int step, int minute, std::string bytes) {
    store::StoredCapture capture;
    capture.step = step;
    capture.instrument = "scope";
    capture.file_name = "step.csv";
    capture.t_ns = kStart + minute * 60 * kSecond;
    capture.bytes = std::move(bytes);
    capture.size = static_cast<std::int64_t>(capture.bytes.size());
    bench.run.captures.push_back(std::move(capture));
  }

  CaptureQuantities of_level() {
    WindowContext context;
    context.run = "run 1";
    context.step = "step";
    context.step_index = 1;
    remarks.clear();
    return quantities_of(captures_of(bench.run, bench.hookup, bench.stair, context, remarks));
  }

  std::vector<std::string> remarks;
};

TEST_CASE("the direct component is taken against captures at the zeros before and after") {
  CapturedRun run;
  const Quantity direct = run.of_level().dc_component;
  INFO(direct.why);
  REQUIRE(direct.known);
  CHECK(direct.unit == "V");
  // 0.85 V less the zeros' 0.35 V; half the drift, 0.05 V, as a rectangular half-width, dominates.
  CHECK(direct.value == Approx(0.5).margin(0.02));
  CHECK(direct.high - direct.low == Approx(2.0 * 1.96 * 0.05 / std::sqrt(3.0)).epsilon(0.2));
}

TEST_CASE("without both zeros the direct component is undecided; a broken zero is told") {
  CapturedRun run;
  run.bench.run.captures[2].bytes = "hello";
  Quantity direct = run.of_level().dc_component;
  CHECK_FALSE(direct.known);
  CHECK_THAT(direct.why, Contains("undecided: no zero after the capture"));
  REQUIRE(run.remarks.size() == 1);
  CHECK_THAT(run.remarks[0], Contains("zero not used: step.csv"));
  run.bench.run.captures.erase(run.bench.run.captures.begin());
  direct = run.of_level().dc_component;
  CHECK_THAT(direct.why, Contains("undecided: no zero before and none after"));
}

TEST_CASE("every declared error of a capture's source enters what it concerns") {
  CapturedRun run;
  setup::CaptureSource& source = run.bench.hookup.captures[0];
  const auto quote = [&]() {
    WindowContext context;
    context.run = "run 1";
    context.step = "step";
    context.step_index = 1;
    return captures_of(run.bench.run, run.bench.hookup, run.bench.stair, context, run.remarks).at(0).quote;
  };
  const auto u = [](const estimate::Quoted& quoted) {
    REQUIRE(quoted);
    return quoted->standard_uncertainty();
  };
  const auto plain = quote();
  CHECK_FALSE(plain.frequency_hz);
  CHECK_FALSE(plain.channels.at(0).crest_factor_in_band);

  source.timebase_ppm = 50.0;
  CHECK(u(quote().frequency_hz) > 50.0 * 50e-6 / std::sqrt(3.0));

  source.voltage_offset_v = 2.0;
  CHECK(u(quote().channels[0].mean) == Approx(2.0 / std::sqrt(3.0)).epsilon(0.05));
  source.voltage_offset_v = 0.0;

  source.voltage_linearity_percent = 0.5;
  CHECK(u(quote().channels[0].mean) == Approx(0.005 * 651.0 / std::sqrt(3.0)).epsilon(0.05));
  source.voltage_linearity_percent = 0.0;

  source.phase_tolerance_deg = 1.0;
  const double u_phase = kPi / 180.0 / std::sqrt(3.0);
  CHECK(std::sqrt(std::pow(u(quote().power.active_w), 2) - std::pow(u(plain.power.active_w), 2)) ==
        Approx(plain.power.active_w->value() * std::tan(kPi / 3.0) * u_phase).epsilon(0.01));
  source.phase_tolerance_deg = 0.0;

  // |H| at 1 kHz of a 5 kHz low-pass is 1/sqrt(1.04): order 20 was larger by 2 %.
  source.voltage_bandwidth_hz = 5000.0;
  source.deskewed = "2026-03-01";
  CHECK(quote().channels[0].thd_f->value() / plain.channels[0].thd_f->value() ==
        Approx(std::sqrt(1.04 / (1.0 + 1e-4))).epsilon(0.002));
  source.voltage_bandwidth_hz.reset();

  source.crest_band_hz = 500.0;
  const Quantity crest = run.of_level().crest_factor;
  // The peak stands on a direct component of 0.85 V, and order 20 is left out.
  CHECK(crest.value == Approx(std::numbers::sqrt2 * (1.0 + 0.85 / 325.0)).epsilon(0.0005));
  source.crest_band_hz.reset();

  // The current 50 us late: taken out, the angle is 0.9 degrees smaller.
  source.current_delay_s = 50e-6;
  const double before = std::acos(plain.power.displacement_power_factor->value());
  CHECK(before - std::acos(quote().power.displacement_power_factor->value()) ==
        Approx(2.0 * kPi * 50.0 * 50e-6).epsilon(0.01));
}

TEST_CASE("the distortion of the current stands beside that of the voltage") {
  CapturedRun run;
  const CaptureQuantities found = run.of_level();
  REQUIRE(found.thd_voltage.known);
  CHECK(found.thd_voltage.value == Approx(0.01).epsilon(0.05));
  REQUIRE(found.thd_current.known);
  CHECK(found.thd_current.value < 0.001);
  run.bench.hookup.captures[0].current_column.clear();
  CHECK_THAT(run.of_level().thd_current.why, Contains("no current"));
}

}  // namespace
