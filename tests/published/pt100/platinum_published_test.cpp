// Platinum thermometers against IEC 60751:2008. Sources and their confirmation: SOURCE.md.
#include <cmath>

#include "analysis/sensors/sensors.h"
#include "tests/published/table.h"

namespace loadstair::sensors {
namespace {

using published::number;
using published::read_table;

TEST_CASE("resistance of a Pt100 equals the published table") {
  const auto rows = read_table("pt100/table.csv");
  REQUIRE(rows.size() == 106);
  for (const auto& row : rows) {
    const double t = number(row, "t_degC");
    INFO(t);
    const auto r = platinum_resistance(t);
    REQUIRE(r);
    CHECK(std::abs(r->value - number(row, "R_ohm_rounded_0.01")) <= 0.005 + 1e-9);
    CHECK(r->value == Approx(number(row, "R_ohm_from_equation")).epsilon(1e-9));
    CHECK(r->sensitivity == Approx(number(row, "dR_dt_ohm_per_K")).epsilon(1e-7));
    const auto back = platinum_temperature(r->value);
    REQUIRE(back);
    CHECK(std::abs(back->value - t) < 1e-9);
    CHECK(back->sensitivity == Approx(1.0 / r->sensitivity).epsilon(1e-9));
  }
}

TEST_CASE("temperature from resistance equals the exact roots") {
  for (const auto& row : read_table("pt100/inverse_points.csv")) {
    const auto t = platinum_temperature(number(row, "R_ohm"));
    INFO(row.at("R_ohm"));
    REQUIRE(t);
    // 14 significant digits are given.
    CHECK(t->value == Approx(number(row, "t_exact_root_degC")).epsilon(1e-12).margin(1e-11));
    const auto pt1000 = platinum_temperature(10.0 * number(row, "R_ohm"), 1000.0);
    REQUIRE(pt1000);
    CHECK(pt1000->value == Approx(t->value).epsilon(1e-12).margin(1e-11));
  }
}

TEST_CASE("tolerances equal the published class A and B table") {
  for (const auto& row : read_table("pt100/tolerance_table.csv")) {
    const double t = number(row, "t_degC");
    INFO(t);
    if (t >= -100.0 && t <= 450.0) {
      const auto a = platinum_tolerance_k(PlatinumClass::a, PlatinumBuild::wire_wound, t);
      REQUIRE(a);
      // Printed to 0.01 degC and ohm.
      CHECK(std::abs(*a - number(row, "class_A_degC")) <= 0.005 + 1e-9);
      CHECK(std::abs(*a * platinum_resistance(t)->sensitivity - number(row, "class_A_ohm")) <= 0.01);
    }
    if (t >= -196.0 && t <= 600.0) {
      const auto b = platinum_tolerance_k(PlatinumClass::b, PlatinumBuild::wire_wound, t);
      REQUIRE(b);
      CHECK(std::abs(*b - number(row, "class_B_degC")) <= 0.05 + 1e-9);
      CHECK(std::abs(*b * platinum_resistance(t)->sensitivity - number(row, "class_B_ohm")) <= 0.01);
    }
  }
}

TEST_CASE("the exact points of the equations, for Pt100 and Pt1000") {
  const auto rows = read_table("pt100/exact_points.csv");
  REQUIRE(rows.size() == 17);
  for (const auto& row : rows) {
    const double t = number(row, "t_degC");
    INFO(t);
    CHECK(platinum_resistance(t)->value == Approx(number(row, "R_ohm")).epsilon(1e-14));
    CHECK(platinum_resistance(t, 1000.0)->value == Approx(10.0 * number(row, "R_ohm")).epsilon(1e-14));
    CHECK(std::abs(platinum_temperature(number(row, "R_ohm"))->value - t) < 1e-10);
  }
  // alpha is printed to four digits: (R100 - R0)/(100 R0).
  CHECK(std::abs((platinum_resistance(100.0)->value - 100.0) / 1e4 - 0.003851) < 5e-7);
}

TEST_CASE("the four tolerance classes, wire-wound and film, inside and outside their ranges") {
  const auto rows = read_table("pt100/classes.csv");
  REQUIRE(rows.size() == 4);
  for (const auto& row : rows) {
    const auto tolerance_class = parse_platinum_class(row.at("class"));
    REQUIRE(tolerance_class);
    for (const bool film : {false, true}) {
      const PlatinumBuild build = film ? PlatinumBuild::film : PlatinumBuild::wire_wound;
      const double low = number(row, film ? "film_low_degC" : "wire_low_degC");
      const double high = number(row, film ? "film_high_degC" : "wire_high_degC");
      INFO(row.at("class") << (film ? " film" : " wire-wound"));
      for (const double t : {low, 0.5 * (low + high), 0.0, high}) {
        const auto found = platinum_tolerance_k(*tolerance_class, build, t);
        REQUIRE(found);
        CHECK(*found ==
              Approx(number(row, "absolute_K") + number(row, "relative") * std::abs(t)).epsilon(1e-14));
      }
      CHECK_FALSE(platinum_tolerance_k(*tolerance_class, build, low - 0.1));
      CHECK_FALSE(platinum_tolerance_k(*tolerance_class, build, high + 0.1));
    }
  }
  CHECK_FALSE(parse_platinum_class("D"));
}

}  // namespace
}  // namespace loadstair::sensors
