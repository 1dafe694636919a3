#include "analysis/settling/three_points.h"

#include <catch2/catch.hpp>
#include <cmath>

using namespace loadstair;
using estimate::Estimate;

TEST_CASE("the end from three readings: derivatives are finite differences") {
  const double values[3] = {28.4, 36.5, 40.6};
  const auto found_at = [&](double da, double db, double dc) {
    return settling::three_point_end(Estimate{values[0] + da}, Estimate{values[1] + db},
                                     Estimate{values[2] + dc}, 1200.0);
  };
  const double step = 1e-5;
  for (int which = 0; which < 3; ++which) {
    const double d[3] = {which == 0 ? step : 0.0, which == 1 ? step : 0.0, which == 2 ? step : 0.0};
    const auto up = found_at(d[0], d[1], d[2]);
    const auto down = found_at(-d[0], -d[1], -d[2]);
    REQUIRE(up);
    REQUIRE(down);
    const auto source = estimate::make_type_b("s", "s", estimate::Distribution::normal);
    const auto reading = [&](int i) {
      return i == which ? Estimate{values[i], source, 1.0} : Estimate{values[i]};
    };
    const auto found = settling::three_point_end(reading(0), reading(1), reading(2), 1200.0);
    REQUIRE(found);
    REQUIRE(found->end.terms().size() == 1);
    CHECK(found->end.terms()[0].contribution ==
          Approx((up->end.value() - down->end.value()) / (2 * step)).epsilon(1e-6));
    CHECK(found->tau_s.terms()[0].contribution ==
          Approx((up->tau_s.value() - down->tau_s.value()) / (2 * step)).epsilon(1e-6));
  }
}

TEST_CASE("three readings that approach nothing are refused") {
  const auto of = [](double a, double b, double c, double spacing_s) {
    return settling::three_point_end(Estimate{a}, Estimate{b}, Estimate{c}, spacing_s);
  };
  CHECK(of(20.0, 30.0, 35.0, 60.0));
  CHECK(of(50.0, 40.0, 35.0, 60.0)->end.value() == Approx(30.0).epsilon(1e-14));
  CHECK_FALSE(of(20.0, 30.0, 40.0, 60.0));
  CHECK_FALSE(of(20.0, 30.0, 45.0, 60.0));
  CHECK_FALSE(of(20.0, 30.0, 29.0, 60.0));
  CHECK_FALSE(of(20.0, 20.0, 20.0, 60.0));
  CHECK_FALSE(of(20.0, 30.0, 35.0, 0.0));
  CHECK_FALSE(of(20.0, std::nan(""), 35.0, 60.0));
}
