#include "analysis/sensors/sensors.h"

#include <catch2/catch.hpp>
#include <cmath>

namespace loadstair::sensors {
namespace {

constexpr Thermocouple kAll[] = {Thermocouple::b, Thermocouple::e, Thermocouple::j, Thermocouple::k,
                                 Thermocouple::n, Thermocouple::r, Thermocouple::s, Thermocouple::t};

TEST_CASE("temperature to emf and back returns the temperature over the whole range") {
  for (const Thermocouple type : kAll) {
    const TemperatureRange range = inverse_range(type);
    for (int i = 0; i <= 500; ++i) {
      const double t = range.low_degc + (range.high_degc - range.low_degc) * i / 500.0;
      const auto emf = thermocouple_emf(type, t);
      REQUIRE(emf);
      const auto back = thermocouple_temperature(type, emf->value);
      INFO(letter_of(type) << " at " << t);
      REQUIRE(back);
      // The terms of the polynomials cancel near their cold ends; 1e-13 V is left, over the slope.
      CHECK(std::abs(back->temperature_degc - t) < 1e-9 + 1e-13 / emf->sensitivity);
    }
  }
}

TEST_CASE("slopes of a junction temperature are its finite differences") {
  const double emf_v = 0.02, cold = 24.0;
  const auto at = thermocouple_temperature(Thermocouple::k, emf_v, cold);
  const auto more_emf = thermocouple_temperature(Thermocouple::k, emf_v + 1e-6, cold);
  const auto warmer = thermocouple_temperature(Thermocouple::k, emf_v, cold + 0.01);
  REQUIRE((at && more_emf && warmer));
  CHECK((more_emf->temperature_degc - at->temperature_degc) / 1e-6 ==
        Approx(at->per_emf_k_per_v).epsilon(1e-4));
  CHECK((warmer->temperature_degc - at->temperature_degc) / 0.01 ==
        Approx(at->per_cold_junction).epsilon(1e-4));
}

TEST_CASE("a thermocouple out of range is refused, never extrapolated") {
  for (const Thermocouple type : kAll) {
    CHECK_FALSE(thermocouple_emf(type, direct_range(type).high_degc + 0.1));
    CHECK_FALSE(thermocouple_emf(type, direct_range(type).low_degc - 0.1));
    CHECK_FALSE(thermocouple_emf(type, std::nan("")));
    CHECK_FALSE(thermocouple_temperature(type, 0.1));
    CHECK_FALSE(thermocouple_temperature(type, -0.1));
    CHECK_FALSE(thermocouple_temperature(type, std::nan("")));
  }
  const auto high = thermocouple_temperature(Thermocouple::k, 0.06);
  REQUIRE_FALSE(high);
  CHECK(high.refusal().place == "thermocouple type K");
  CHECK(
      high.refusal().reason ==
      "60.0000 mV against 0 degC is outside -6.45774 to 54.8864 mV; check the sensor, its polarity and type");
  // The emf of type B is not unique below about 42 degC.
  CHECK_FALSE(thermocouple_temperature(Thermocouple::b, 0.0));
}

TEST_CASE("only the eight letters are thermocouples") {
  CHECK(parse_thermocouple("k").value() == Thermocouple::k);
  CHECK_FALSE(parse_thermocouple("C"));
  CHECK_FALSE(parse_thermocouple(""));
  CHECK_FALSE(parse_thermocouple("KK"));
}

TEST_CASE("platinum out of range is refused") {
  CHECK_FALSE(platinum_temperature(18.0));
  CHECK_FALSE(platinum_temperature(391.0));
  CHECK_FALSE(platinum_temperature(std::nan("")));
  CHECK_FALSE(platinum_temperature(100.0, 0.0));
  CHECK_FALSE(platinum_resistance(851.0));
}

TEST_CASE("both thermistor forms give their own definition back") {
  // Steinhart and Hart (1968): with c = 0 the form is the beta form, a = 1/T0 - ln(R0)/beta, b = 1/beta.
  const Beta beta{10000.0, 3950.0};
  const SteinhartHart same{1.0 / 298.15 - std::log(10000.0) / 3950.0, 1.0 / 3950.0, 0.0};
  CHECK(thermistor_temperature(beta, 10000.0)->value == Approx(25.0).epsilon(1e-12));
  for (const double t : {-40.0, 0.0, 25.0, 85.0, 150.0}) {
    const auto r = thermistor_resistance(beta, t);
    REQUIRE(r);
    const auto back = thermistor_temperature(beta, r->value);
    REQUIRE(back);
    CHECK(back->value == Approx(t).margin(1e-9));
    CHECK(back->sensitivity == Approx(1.0 / r->sensitivity).epsilon(1e-9));
    CHECK(thermistor_temperature(same, r->value)->value == Approx(t).margin(1e-9));
  }
  CHECK_FALSE(thermistor_temperature(beta, 0.0));
  CHECK_FALSE(thermistor_temperature(beta, -5.0));
  CHECK_FALSE(thermistor_temperature(beta, 1e-9));
}

TEST_CASE("a shunt's current obeys Ohm's law, warmed by ambient and by itself") {
  CHECK(shunt_current({0.01}, 0.075)->current_a == Approx(7.5).epsilon(1e-14));
  const Shunt warm{0.01, 50e-6, 20.0, 0.0};
  CHECK(shunt_current(warm, 0.075, 40.0)->current_a == Approx(7.5 / (1.0 + 50e-6 * 20.0)).epsilon(1e-14));

  const Shunt heated{0.01, 500e-6, 23.0, 15.0};
  const auto found = shunt_current(heated, 0.1);
  REQUIRE(found);
  // The answer satisfies its own definition: rise = P Rth, R = R0 (1 + a rise), I = U/R.
  CHECK(found->rise_k == Approx(found->power_w * 15.0).epsilon(1e-12));
  CHECK(found->resistance_ohm == Approx(0.01 * (1.0 + 500e-6 * found->rise_k)).epsilon(1e-12));
  CHECK(found->current_a == Approx(0.1 / found->resistance_ohm).epsilon(1e-12));
  const double step = 1e-6;
  CHECK((shunt_current(heated, 0.1 + step)->current_a - shunt_current(heated, 0.1 - step)->current_a) /
            (2 * step) ==
        Approx(found->per_volt_a).epsilon(1e-7));
  CHECK(shunt_current(heated, -0.1)->current_a == Approx(-found->current_a).epsilon(1e-14));

  CHECK_FALSE(shunt_current({0.0}, 0.1));
  CHECK_FALSE(shunt_current({0.01}, std::nan("")));
  CHECK_FALSE(shunt_current({0.01, -0.01, 23.0, 1000.0}, 1.0));
}

TEST_CASE("winding rise by resistance") {
  // Formula and k from memory; values by hand from the formula: 0.31/1.25 * 256.5 - 2.5.
  CHECK(winding_rise_k(1.25, 22.0, 1.56, 24.5).value() == Approx(61.112).epsilon(1e-12));
  CHECK(winding_rise_k(10.0, 20.0, 12.0, 20.0).value() == Approx(50.9).epsilon(1e-12));
  CHECK(winding_rise_k(10.0, 20.0, 12.0, 20.0, 225.0).value() == Approx(49.0).epsilon(1e-12));
  CHECK_FALSE(winding_rise_k(0.0, 20.0, 12.0, 20.0));
}

}  // namespace
}  // namespace loadstair::sensors
