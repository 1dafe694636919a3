#include "analysis/estimate/meter.h"

#include <catch2/catch.hpp>
#include <cmath>

#include "analysis/estimate/budget.h"

using namespace loadstair;
using estimate::Estimate;
using estimate::MeterRange;

namespace {

MeterRange range(const char* instrument, const char* name, double full_scale, estimate::AccuracySpec spec,
                 double digit = 0) {
  return {{instrument, "dc voltage", name}, full_scale, digit, spec};
}

}  // namespace

TEST_CASE("a meter's error has exactly the variance that its specification implies") {
  // 0.5 % of 230 V, 0.1 % of 600 V and 2 digits of 0.1 V; rectangular: half-width over sqrt 3 (JCGM
  // 100 4.3.7).
  const MeterRange meter = range("V1", "600 V", 600, {0.5, 0.1, 2}, 0.1);
  const auto found = estimate::with_meter_error(230, meter, {"r", "s"});
  REQUIRE(found);
  CHECK(found->value() == 230);
  const double expected = (1.15 * 1.15 + 0.8 * 0.8) / 3;
  CHECK(found->variance() == Approx(expected).epsilon(1e-14));
  // However the shares split it.
  const auto other = estimate::with_meter_error(230, meter, {"r", "s"}, {0.2, 0.3, 0.5});
  REQUIRE(other);
  CHECK(other->variance() == Approx(expected).epsilon(1e-14));
  const auto negative = estimate::with_meter_error(-230, meter, {"r", "s"});
  REQUIRE(negative);
  CHECK(negative->variance() == Approx(expected).epsilon(1e-14));
}

TEST_CASE("limits declared with a coverage factor are divided by it") {
  estimate::AccuracySpec spec{1, 0, 0};
  spec.distribution = estimate::Distribution::normal;
  spec.coverage_factor = 2;
  const auto found = estimate::with_meter_error(100, range("V1", "600 V", 600, spec), {"r", "s"});
  REQUIRE(found);
  CHECK(found->standard_uncertainty() == Approx(0.5).epsilon(1e-14));
}

TEST_CASE("the resolution counts once, and only where the digits do not contain it") {
  const auto without =
      estimate::with_meter_error(100, range("V1", "600 V", 600, {0.1, 0, 0}, 0.5), {"r", "s"});
  REQUIRE(without);
  // JCGM 100 F.2.2.1: q/sqrt 12.
  CHECK(without->variance() == Approx(0.1 * 0.1 / 3 + 0.5 * 0.5 / 12).epsilon(1e-14));
  const auto with = estimate::with_meter_error(100, range("V1", "600 V", 600, {0.1, 0, 1}, 0.5), {"r", "s"});
  REQUIRE(with);
  CHECK(with->variance() == Approx((0.1 * 0.1 + 0.5 * 0.5) / 3).epsilon(1e-14));
}

TEST_CASE("one meter moved between ports cancels in a ratio as far as its error lasts; two ranges do not") {
  const MeterRange meter = range("V1", "600 V", 600, {0.5, 0, 0});
  const auto in = estimate::with_meter_error(385, meter, {"r", "step 1, input"});
  const auto out = estimate::with_meter_error(230, meter, {"r", "step 1, output"});
  const auto finer =
      estimate::with_meter_error(230, range("V1", "250 V", 250, {0.5, 0, 0}), {"r", "step 1, output"});
  REQUIRE(in);
  REQUIRE(out);
  REQUIRE(finer);
  const double u = 0.005 / std::sqrt(3);
  // Only the share per level (0.1) is left, from each.
  CHECK((*out / *in).standard_uncertainty() / (230.0 / 385) == Approx(u * std::sqrt(0.2)).epsilon(1e-12));
  CHECK((*finer / *in).standard_uncertainty() / (230.0 / 385) == Approx(u * std::sqrt(2)).epsilon(1e-12));
  // In another run the share per run is new too.
  const auto later = estimate::with_meter_error(230, meter, {"r2", "step 1, output"});
  REQUIRE(later);
  CHECK(estimate::correlation(*in, *later) == Approx(0.8).epsilon(1e-12));
  CHECK(estimate::correlation(*in, *out) == Approx(0.9).epsilon(1e-12));
}

TEST_CASE("an offset is constant in units over its range") {
  const MeterRange meter = range("A1", "10 A", 10, {0, 0.1, 0});
  const auto low = estimate::with_meter_error(0.5, meter, {"r", "a"});
  const auto high = estimate::with_meter_error(9, meter, {"r", "b"});
  REQUIRE(low);
  REQUIRE(high);
  CHECK(low->standard_uncertainty() == Approx(0.01 / std::sqrt(3)).epsilon(1e-14));
  CHECK(high->standard_uncertainty() == Approx(0.01 / std::sqrt(3)).epsilon(1e-14));
  CHECK(estimate::correlation(*low, *high) == Approx(0.9).epsilon(1e-12));
}

TEST_CASE("what is not declared is refused by name, not guessed") {
  MeterRange meter = range("V1", "600 V", 600, {0.5, 0, 0});
  meter.accuracy.reset();
  const auto unknown = estimate::with_meter_error(230, meter, {"r", "s"});
  REQUIRE_FALSE(unknown);
  CHECK(unknown.refusal().text() ==
        "V1 dc voltage on 600 V: uncertainty not known: no accuracy is declared for this range");
  CHECK_FALSE(estimate::with_meter_error(std::nan(""), range("V1", "600 V", 600, {0.5, 0, 0}), {"r", "s"}));
  CHECK_FALSE(estimate::with_meter_error(1, range("V1", "600 V", 0, {0.5, 0.1, 0}), {"r", "s"}));
  CHECK_FALSE(estimate::with_meter_error(1, range("V1", "600 V", 600, {0.5, 0, 2}), {"r", "s"}));
  CHECK_FALSE(estimate::with_meter_error(1, range("V1", "600 V", 600, {-0.5, 0, 0}), {"r", "s"}));
  CHECK_FALSE(
      estimate::with_meter_error(1, range("V1", "600 V", 600, {0.5, 0, 0}), {"r", "s"}, {0.5, 0.1, 0.1}));
}

TEST_CASE("a budget of a low reading on a long range asks for another range") {
  const auto found = estimate::with_meter_error(12, range("V1", "600 V", 600, {0.05, 0.1, 0}), {"r", "s"});
  REQUIRE(found);
  const auto lines = estimate::budget(*found).lines;
  REQUIRE(lines.size() == 3);
  CHECK(lines[0].name == "V1 dc voltage on 600 V: offset");
  CHECK(lines[0].action == "use a range nearer to the reading");
  REQUIRE(lines[0].expanded_if_done);
  CHECK(*lines[0].expanded_if_done < 0.5 * estimate::coverage(*found).expanded);
}

TEST_CASE("a wattmeter's power shares its gain with its voltage and current, at its own total") {
  estimate::WattmeterReading reading;
  reading.voltage = 230;
  reading.current = 2;
  reading.active_power = 414;  // power factor 0.9
  reading.voltage_range = {{"W1", "ac voltage", "300 V"}, 300, 0, estimate::AccuracySpec{0.1, 0.05, 0}};
  reading.current_range = {{"W1", "ac current", "5 A"}, 5, 0, estimate::AccuracySpec{0.1, 0.05, 0}};
  reading.power_range = {
      {"W1", "active power", "300 V x 5 A"}, 1500, 0, estimate::AccuracySpec{0.2, 0.05, 0}};
  reading.phase_limit_rad = 0.001;
  const auto found = estimate::with_wattmeter_error(reading, {"r", "s"});
  REQUIRE(found);
  // (0.2 % of 414 W, 0.05 % of 1500 VA, V I sin(phi) times 1 mrad), each rectangular.
  const double phase = 460 * std::sqrt(1 - 0.81) * 0.001;
  CHECK(found->active_power.variance() ==
        Approx((0.828 * 0.828 + 0.75 * 0.75 + phase * phase) / 3).epsilon(1e-12));
  CHECK(found->voltage.variance() == Approx((0.23 * 0.23 + 0.15 * 0.15) / 3).epsilon(1e-12));
  // The lasting nine tenths of the voltage's gain are in both: 0.9 (0.1 % of 414 W) (0.1 % of 230 V) / 3.
  CHECK(estimate::covariance(found->active_power, found->voltage) ==
        Approx(0.9 * 0.414 * 0.23 / 3).epsilon(1e-12));
  // The power factor is known better than by three meters that share nothing.
  const Estimate pf = found->active_power / (found->voltage * found->current);
  const auto relative = [](const Estimate& e) { return e.variance() / (e.value() * e.value()); };
  CHECK(relative(pf) < relative(found->active_power) + relative(found->voltage) + relative(found->current));
  // Where the power is specified tighter than its factors, the total is still its own.
  reading.power_range.accuracy = estimate::AccuracySpec{0.05, 0.05, 0};
  const auto tight = estimate::with_wattmeter_error(reading, {"r", "s"});
  REQUIRE(tight);
  CHECK(tight->active_power.variance() ==
        Approx((0.207 * 0.207 + 0.75 * 0.75 + phase * phase) / 3).epsilon(1e-12));
}

TEST_CASE("a phase error moves the power by V I sin(phi) times it, as a turned phasor shows") {
  // V I cos(phi + delta) - V I cos(phi), exactly; to first order P tan(phi) delta.
  for (const double phi : {0.05, 0.45, 1.2, 1.5}) {
    estimate::WattmeterReading reading;
    reading.voltage = 230;
    reading.current = 2;
    reading.active_power = 460 * std::cos(phi);
    reading.voltage_range = {{"W1", "ac voltage", "300 V"}, 300, 0, estimate::AccuracySpec{}};
    reading.current_range = {{"W1", "ac current", "5 A"}, 5, 0, estimate::AccuracySpec{}};
    reading.power_range = {{"W1", "active power", "300 V x 5 A"}, 1500, 0, estimate::AccuracySpec{}};
    reading.phase_limit_rad = 1e-5;
    const auto found = estimate::with_wattmeter_error(reading, {"r", "s"});
    REQUIRE(found);
    const double turned = std::abs(460 * std::cos(phi + 1e-5) - reading.active_power);
    CHECK(found->active_power.standard_uncertainty() * std::sqrt(3.0) == Approx(turned).epsilon(2e-4));
    CHECK(found->active_power.standard_uncertainty() * std::sqrt(3.0) ==
          Approx(reading.active_power * std::tan(phi) * 1e-5).epsilon(1e-9));
  }
}
