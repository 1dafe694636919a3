#include "drivers/rehearsal/meters.h"

#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <numbers>

#include "drivers/rehearsal/draws.h"

namespace loadstair::rehearsal {
namespace {

TEST_CASE("the generator is PCG32", "[rehearsal]") {
  // First outputs of the author's demonstration program for state 42, stream 54 (from memory).
  Pcg32 generator{42, 54};
  for (const std::uint32_t expected :
       {0xa15c02b7U, 0x7b47f409U, 0xba1d3330U, 0x83d2f293U, 0xbfa4784bU, 0xcbed606eU})
    CHECK(generator.next() == expected);
}

TEST_CASE("draws have the moments of their distributions", "[rehearsal]") {
  double sum = 0.0, square = 0.0, fourth = 0.0, flat_square = 0.0;
  constexpr int kCount = 200000;
  for (int i = 0; i < kCount; ++i) {
    const double z = normal_draw(key_of(7, "test", {static_cast<std::uint64_t>(i)}));
    sum += z;
    square += z * z;
    fourth += z * z * z * z;
    const double u = symmetric_draw(key_of(8, "test", {static_cast<std::uint64_t>(i)}));
    flat_square += u * u;
  }
  // Seven standard errors of each moment: a false alarm in 1e11 of fixed seeds.
  CHECK(sum / kCount == Approx(0.0).margin(7.0 / std::sqrt(kCount)));
  CHECK(square / kCount == Approx(1.0).margin(7.0 * std::sqrt(2.0 / kCount)));
  CHECK(fourth / kCount == Approx(3.0).margin(7.0 * std::sqrt(96.0 / kCount)));
  CHECK(flat_square / kCount == Approx(1.0 / 3.0).margin(7.0 * std::sqrt(4.0 / 45.0 / kCount)));
}

MeterDescription voltmeter() {
  MeterDescription d;
  d.name = "voltmeter";
  MeterFunction f;
  f.name = "reading";
  f.ranges = {{60.0, 0.01, 0.3, 0.05, 3.0, 0.0}, {600.0, 0.1, 0.5, 0.1, 2.0, 0.0}};
  d.functions = {f};
  return d;
}

TEST_CASE("drawn errors fill the declared specification, rectangular, and never leave it", "[rehearsal]") {
  constexpr int kSeeds = 10000;
  double gain_square = 0.0, offset_square = 0.0, largest = 0.0;
  double between_runs = 0.0, between_levels = 0.0;
  for (int seed = 0; seed < kSeeds; ++seed) {
    const auto s = static_cast<std::uint64_t>(seed);
    const Meter meter{voltmeter(), s, 1};
    const DrawnError e = meter.error(0, 1, 385.0);
    const double rounding = 0.05;
    const double total = std::abs(e.gain) * 385.0 + std::abs(e.offset) + rounding;
    REQUIRE(total <= 0.005 * 385.0 + 0.001 * 600.0 + 2.0 * 0.1 + 1e-12);
    largest = std::max(largest, std::abs(e.gain));
    const double g = e.gain / 0.005;
    const double o = e.offset / (0.6 + 0.15);
    gain_square += g * g;
    offset_square += o * o;
    between_runs += g * Meter{voltmeter(), s, 2}.error(0, 1, 385.0).gain / 0.005;
    between_levels += g * meter.error(0, 1, 100.0).gain / 0.005;
  }
  const double margin = 7.0 * std::sqrt(4.0 / 45.0 / kSeeds);
  CHECK(gain_square / kSeeds == Approx(1.0 / 3.0).margin(margin));
  CHECK(offset_square / kSeeds == Approx(1.0 / 3.0).margin(margin));
  CHECK(largest > 0.0049);
  // Of two normals with correlation rho, the ranks correlate with 6/pi asin(rho/2) (Pearson 1907; from
  // memory).
  const auto rank = [](double rho) { return 6.0 / std::numbers::pi * std::asin(rho / 2.0); };
  CHECK(3.0 * between_runs / kSeeds == Approx(rank(0.8)).margin(0.05));
  CHECK(3.0 * between_levels / kSeeds == Approx(rank(0.9)).margin(0.05));
}

TEST_CASE("between levels an error moves without a jump", "[rehearsal]") {
  const Meter meter{voltmeter(), 3, 1};
  double before = meter.error(0, 1, 100.0).gain;
  double travelled = 0.0;
  for (double v = 100.1; v < 590.0; v += 0.1) {
    const double now = meter.error(0, 1, v).gain;
    CHECK(std::abs(now - before) < 0.1 * 0.005);
    travelled += std::abs(now - before);
    before = now;
  }
  CHECK(travelled > 0.0);
}

/// A history of one constant step.
History steady(const PlantStep& step, double length_s) {
  History history{0.02, length_s};
  const auto steps = static_cast<int>(std::lround(length_s / 0.02));
  for (int i = 0; i < steps; ++i) history.push(step);
  return history;
}

TEST_CASE("each response turns the same waveform into its own number", "[rehearsal]") {
  // A sine of 230 V with 5 V of DC: mean square 230^2 + 25, rectified mean of the AC part 230 * 2 sqrt 2 /
  // pi.
  PlantStep step;
  step.output.voltage[1] = {5.0, 230.0 * 230.0 + 25.0, 230.0 * 2.0 * std::numbers::sqrt2 / std::numbers::pi};
  const History history = steady(step, 2.0);
  const auto reading = [&](Response response) {
    MeterDescription d;
    d.name = "m";
    MeterFunction f;
    f.port = Port::output;
    f.response = response;
    d.functions = {f};
    return Meter{d, 1, 1}.shown(history, 1.5).at(0).value;
  };
  CHECK(reading(Response::dc) == Approx(5.0).epsilon(1e-12));
  CHECK(reading(Response::true_rms_ac) == Approx(230.0).epsilon(1e-12));
  CHECK(reading(Response::true_rms_ac_dc) == Approx(std::hypot(230.0, 5.0)).epsilon(1e-12));
  CHECK(reading(Response::average_responding) == Approx(230.0).epsilon(1e-12));
}

TEST_CASE("a shunt warms up by the mean square of its current", "[rehearsal]") {
  // 2 A of DC with 1 A of ripple: i^2 = 5 A^2. In 0.1 ohm with 100 ppm/K and 40 K/W, P = k R i^2 and
  // k = 1 + alpha theta P: k = 1 / (1 - 1e-4 * 40 * 0.5) = 1 / 0.998. The mean voltage is 2 A times k R.
  PlantStep step;
  step.input.meter_current = {2.0, 5.0, 2.0};
  const History history = steady(step, 2.0);
  const auto volts = [&](Shunt shunt) {
    MeterDescription d;
    d.name = "m";
    MeterFunction f;
    f.quantity = Quantity::current;
    f.shunt = shunt;
    d.functions = {f};
    return Meter{d, 1, 1}.shown(history, 1.5).at(0).value;
  };
  CHECK(volts({0.1, 0.0}) == Approx(0.2).epsilon(1e-12));
  CHECK(volts({0.1, 0.0, 100.0, 40.0}) == Approx(0.2 / 0.998).epsilon(1e-12));
  CHECK(volts({0.1, 0.0, -100.0, 40.0}) == Approx(0.2 / 1.002).epsilon(1e-12));
  // No heat without a way out of it, and no drift without a coefficient.
  CHECK(volts({0.1, 0.0, 100.0, 0.0}) == Approx(0.2).epsilon(1e-12));
  CHECK(volts({0.1, 0.0, 0.0, 40.0}) == Approx(0.2).epsilon(1e-12));
  CHECK(volts({0.1, 0.0, 1e4, 1e6}) == Approx(2.0).epsilon(1e-12));
}

TEST_CASE("a free-running meter repeats a finished conversion until the next is ready", "[rehearsal]") {
  MeterDescription d;
  d.name = "m";
  MeterFunction f;
  f.name = "reading";
  f.noise = 1.0;
  f.ranges = {{1000.0, 0.0, 0.0, 0.0, 0.0, 0.0}};
  d.functions = {f};
  d.update_period_s = 0.5;
  d.integration_s = 0.2;
  d.delay_s = 0.1;
  const Meter meter{d, 5, 1};
  // A ramp: the mean over a window is the value at its middle.
  History history{0.02, 30.0};
  for (int i = 0; i < 1000; ++i) {
    PlantStep step;
    step.input.voltage[1].mean = (i + 0.5) * 0.02;
    history.push(step);
  }
  int changes = 0;
  double before = meter.shown(history, 10.0).at(0).value;
  for (double t = 10.01; t < 15.0; t += 0.01) {
    const double now = meter.shown(history, t).at(0).value;
    changes += now != before ? 1 : 0;
    before = now;
    const double end = meter.conversion_end_s(meter.conversion_at(t));
    CHECK(end + 0.1 <= t + 1e-6);
    CHECK(end + 0.1 > t - 0.5 - 1e-6);
  }
  CHECK((changes == 9 || changes == 10));
  d.functions[0].noise = 0.0;
  const Meter quiet{d, 5, 1};
  const double end = quiet.conversion_end_s(quiet.conversion_at(12.0));
  CHECK(quiet.shown(history, 12.0).at(0).value == Approx(end - 0.1).margin(1e-9));
}

TEST_CASE("ranges, last digit and overload are as on a display", "[rehearsal]") {
  PlantStep step;
  step.input.voltage[1].mean = 385.04;
  MeterDescription d = voltmeter();
  for (MeterRange& r : d.functions[0].ranges) r.reading_percent = r.range_percent = r.digits = 0.0;
  const Shown a = Meter{d, 1, 1}.shown(steady(step, 1.0), 0.9).at(0);
  CHECK(a.value == Approx(385.0).epsilon(1e-12));
  CHECK(a.full_scale == 600.0);
  step.input.voltage[1].mean = 12.3456;
  const Shown b = Meter{d, 1, 1}.shown(steady(step, 1.0), 0.9).at(0);
  CHECK(b.value == Approx(12.35).epsilon(1e-12));
  CHECK(b.full_scale == 60.0);
  step.input.voltage[1].mean = -601.0;
  CHECK(Meter{d, 1, 1}.shown(steady(step, 1.0), 0.9).at(0).overload);
  d.functions[0].fixed_range = 0;
  step.input.voltage[1].mean = 61.0;
  const Shown c = Meter{d, 1, 1}.shown(steady(step, 1.0), 0.9).at(0);
  CHECK(c.overload);
  CHECK(c.full_scale == 60.0);
}

TEST_CASE("a shunt reads current as volts, inside its tolerance", "[rehearsal]") {
  PlantStep step;
  step.input.meter_current.mean = 1.6;
  const History history = steady(step, 1.0);
  double square = 0.0;
  constexpr int kSeeds = 2000;
  for (std::uint64_t seed = 0; seed < kSeeds; ++seed) {
    MeterDescription d;
    d.name = "m";
    MeterFunction f;
    f.quantity = Quantity::current;
    f.shunt = Shunt{0.1, 0.5};
    d.functions = {f};
    const Meter meter{d, seed, 1};
    const double shown = meter.shown(history, 0.9).at(0).value;
    CHECK(std::abs(shown / 0.16 - 1.0) <= 0.005);
    CHECK(shown == Approx(1.6 * meter.series_ohm(0, 0)).epsilon(1e-12));
    square += std::pow((shown / 0.16 - 1.0) / 0.005, 2);
  }
  CHECK(square / kSeeds == Approx(1.0 / 3.0).margin(7.0 * std::sqrt(4.0 / 45.0 / kSeeds)));
}

}  // namespace
}  // namespace loadstair::rehearsal
