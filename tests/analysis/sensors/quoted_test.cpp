// Sensors as estimates. Outside check: each contribution against moving the input by its amount (JCGM
// 100:2008 5.1.3, note 2), and the tolerance tables' own formulas.
#include "analysis/sensors/quoted.h"

#include <catch2/catch.hpp>
#include <cmath>

namespace loadstair::sensors {
namespace {

using estimate::Estimate;

Estimate of(double value, const char* source, double u) {
  return Estimate{value, estimate::make_type_b(source, source, estimate::Distribution::normal), u};
}

double share(const Estimate& estimate, const std::string& name) {
  for (const estimate::Term& term : estimate.terms()) {
    if (term.source->name == name) return term.contribution;
  }
  return 0.0;
}

const double kRoot3 = std::sqrt(3.0);

TEST_CASE("a thermocouple's estimate has emf, cold junction and class as sources") {
  const auto found =
      quoted_thermocouple(Thermocouple::k, of(0.004, "emf", 2e-6), of(23.0, "cold", 0.5), 2, "couple TC1");
  REQUIRE(found);
  const auto value = [](double emf_v, double cold_degc) {
    return thermocouple_temperature(Thermocouple::k, emf_v, cold_degc)->temperature_degc;
  };
  CHECK(found->value() == value(0.004, 23.0));
  CHECK(share(*found, "emf") ==
        Approx((value(0.004 + 2e-6, 23.0) - value(0.004 - 2e-6, 23.0)) / 2).epsilon(1e-6));
  CHECK(share(*found, "cold") == Approx((value(0.004, 23.5) - value(0.004, 22.5)) / 2).epsilon(1e-4));
  // IEC 60584-1, class 2 of type K: 2.5 K up to 333 degC.
  CHECK(share(*found, "couple TC1: tolerance class") == Approx(2.5 / kRoot3).epsilon(1e-12));

  const auto calibrated = quoted_thermocouple(Thermocouple::k, of(0.004, "emf", 2e-6), Estimate{23.0},
                                              std::nullopt, "couple TC1");
  REQUIRE(calibrated);
  CHECK(calibrated->terms().size() == 1);
  CHECK_FALSE(quoted_thermocouple(Thermocouple::k, Estimate{0.06}, Estimate{23.0}, 2, "couple TC1"));
  CHECK_FALSE(quoted_thermocouple(Thermocouple::k, Estimate{0.004}, Estimate{23.0}, 7, "couple TC1"));
}

TEST_CASE("a platinum thermometer's estimate has resistance, leads and class as sources") {
  const PlatinumSensor sensor{1000.0, PlatinumClass::a, PlatinumBuild::film, 1.2, 30.0};
  const auto found = quoted_platinum(sensor, of(1234.0, "ohm", 0.2), "PT1");
  REQUIRE(found);
  const double t = platinum_temperature(1232.8, 1000.0)->value;
  CHECK(found->value() == t);
  const double per_ohm =
      platinum_temperature(1233.3, 1000.0)->value - platinum_temperature(1232.3, 1000.0)->value;
  CHECK(share(*found, "ohm") == Approx(0.2 * per_ohm).epsilon(1e-6));
  CHECK(share(*found, "PT1: leads") == Approx(1.2 * 0.3 * per_ohm / kRoot3).epsilon(1e-6));
  CHECK(share(*found, "PT1: tolerance class") == Approx((0.15 + 0.002 * t) / kRoot3).epsilon(1e-12));

  CHECK(quoted_platinum({100.0, std::nullopt}, Estimate{110.0}, "PT2")->terms().empty());
  // Beyond the range of class AA on film; a lead below zero.
  CHECK_FALSE(quoted_platinum({100.0, PlatinumClass::aa}, Estimate{160.0}, "PT2"));
  CHECK_FALSE(quoted_platinum({100.0, std::nullopt, PlatinumBuild::film, -1.0}, Estimate{110.0}, "PT2"));
}

TEST_CASE("a thermistor's estimate has resistance and tolerance as sources") {
  const Beta beta{10000.0, 3950.0};
  const auto found = quoted_thermistor(beta, of(5000.0, "ohm", 10.0), 0.5, "NTC1");
  REQUIRE(found);
  const auto value = [&](double ohm) { return thermistor_temperature(beta, ohm)->value; };
  CHECK(share(*found, "ohm") == Approx((value(5010.0) - value(4990.0)) / 2).epsilon(1e-5));
  CHECK(share(*found, "NTC1: tolerance") == Approx(0.5 / kRoot3).epsilon(1e-12));
  const SteinhartHart three{1.0 / 298.15 - std::log(10000.0) / 3950.0, 1.0 / 3950.0, 0.0};
  const auto same = quoted_thermistor(three, of(5000.0, "ohm", 10.0), 0.5, "NTC1");
  REQUIRE(same);
  CHECK(same->value() == Approx(found->value()).margin(1e-9));
  CHECK(same->variance() == Approx(found->variance()).epsilon(1e-9));
  CHECK_FALSE(quoted_thermistor(beta, Estimate{5000.0}, -0.5, "NTC1"));
  CHECK_FALSE(quoted_thermistor(beta, Estimate{-5000.0}, 0.5, "NTC1"));
}

TEST_CASE("the Steinhart-Hart form with its cubic term: inverse by Cardano's closed form") {
  // Ten kilohm thermistor with a cubic term; R(T) from the cubic's closed root (any text on algebra).
  const SteinhartHart s{1.1292e-3, 2.3411e-4, 0.8775e-7};
  for (const double t : {-30.0, 0.0, 25.0, 60.0, 110.0}) {
    const double x = (s.a - 1.0 / (t + 273.15)) / s.c;
    const double y = std::sqrt(std::pow(s.b / (3.0 * s.c), 3.0) + x * x / 4.0);
    const double ohm = std::exp(std::cbrt(y - x / 2.0) - std::cbrt(y + x / 2.0));
    const auto found = thermistor_temperature(s, ohm);
    REQUIRE(found);
    CHECK(found->value == Approx(t).margin(1e-8));
    const double h = 1e-4 * ohm;
    CHECK(found->sensitivity ==
          Approx((thermistor_temperature(s, ohm + h)->value - thermistor_temperature(s, ohm - h)->value) /
                 (2 * h))
              .epsilon(1e-6));
  }
}

TEST_CASE("a shunt's estimate: resistance, ambient and own rise, each as if it were moved") {
  const Shunt shunt{0.01, 400e-6, 23.0, 15.0};
  const ShuntErrors errors{0.5, 35.0, 3.0, 0.3};
  const auto found = quoted_shunt(shunt, errors, of(0.1, "volt", 1e-5), "S1");
  REQUIRE(found);
  const auto current = [&](double ohm, double volt, double ambient) {
    Shunt moved = shunt;
    moved.resistance_ohm = ohm;
    return shunt_current(moved, volt, ambient)->current_a;
  };
  CHECK(found->value() == Approx(current(0.01, 0.1, 35.0)).epsilon(1e-14));
  CHECK(share(*found, "volt") ==
        Approx((current(0.01, 0.1 + 1e-5, 35.0) - current(0.01, 0.1 - 1e-5, 35.0)) / 2).epsilon(1e-6));
  const double by_ohm = (current(0.01 * 1.005, 0.1, 35.0) - current(0.01 * 0.995, 0.1, 35.0)) / 2;
  CHECK(share(*found, "S1: resistance") == Approx(by_ohm / kRoot3).epsilon(1e-4));
  CHECK(by_ohm < 0.0);
  const double rise_k = shunt_current(shunt, 0.1, 35.0)->rise_k;
  const double limit_k = 3.0 + 0.3 * rise_k;
  const double by_kelvin = (current(0.01, 0.1, 35.0 + limit_k) - current(0.01, 0.1, 35.0 - limit_k)) / 2;
  CHECK(share(*found, "S1: temperature") == Approx(by_kelvin / kRoot3).epsilon(1e-4));
  CHECK_FALSE(quoted_shunt(shunt, {-1.0}, Estimate{0.1}, "S1"));
  CHECK_FALSE(quoted_shunt({0.0}, {}, Estimate{0.1}, "S1"));
}

}  // namespace
}  // namespace loadstair::sensors
