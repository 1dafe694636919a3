#include "analysis/series/align.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <numbers>
#include <vector>

using namespace loadstair;

TEST_CASE("aligning reproduces a line exactly and leaves out what would be extrapolated") {
  const std::vector<double> t{0, 1, 2.5, 3};
  const std::vector<double> y{1, 3, 6, 7};
  const std::vector<double> at{-0.5, 0, 0.25, 2.5, 2.75, 3, 3.5};
  const auto found = series::align({t, y}, at, 0.1);
  REQUIRE(found);
  CHECK(found->value == std::vector<double>{1, 1.5, 6, 6.5, 7});
  CHECK(found->instant == std::vector<std::size_t>{1, 2, 3, 4, 5});
  CHECK(found->curvature_bound == Approx(0).margin(1e-12));
  CHECK(found->timing_bound == Approx(0.1 * 2).epsilon(1e-12));
}

TEST_CASE("the error of aligning a sine stays within h^2/8 of its second derivative") {
  // |f''| <= w^2: the closed bound of linear interpolation. Nine readings cover 1/8 of a period, over which
  // the fitted parabola keeps 97 % of it or more.
  const double h = 1.0 / 64;
  const double w = 2 * std::numbers::pi;
  std::vector<double> t;
  std::vector<double> y;
  for (int i = 0; i <= 128; ++i) {
    t.push_back(h * i);
    y.push_back(std::sin(w * t.back()));
  }
  std::vector<double> at;
  for (int i = 0; i < 400; ++i) at.push_back(2 * (i + 0.5) / 400);
  const auto found = series::align({t, y}, at, 0);
  REQUIRE(found);
  REQUIRE(found->value.size() == at.size());
  double worst = 0;
  for (std::size_t i = 0; i < at.size(); ++i)
    worst = std::max(worst, std::abs(found->value[i] - std::sin(w * at[i])));
  const double closed = h * h / 8 * w * w;
  CHECK(worst <= closed);
  CHECK(worst > 0.9 * closed);
  CHECK(found->curvature_bound > 0.96 * closed);
  CHECK(found->curvature_bound <= closed * (1 + 1e-9));
}

TEST_CASE("readings of one instant count as their mean") {
  const std::vector<double> t{0, 1, 1, 2};
  const std::vector<double> y{0, 1, 3, 4};
  const auto found = series::align({t, y}, std::vector<double>{0.5, 1, 1.5}, 0);
  REQUIRE(found);
  CHECK(found->value == std::vector<double>{1, 2, 3});
}

TEST_CASE("several channels go onto the instants of the slowest, over what all cover") {
  const std::vector<double> slow_t{0, 1, 2, 3};
  const std::vector<double> slow{5, 5, 5, 5};
  const std::vector<double> fast_t{0.6, 0.9, 1.2, 1.5, 1.8, 2.1, 2.4, 2.7, 3.0};
  std::vector<double> fast;
  for (const double t : fast_t) fast.push_back(10 * t);
  const std::vector<series::TimeSeries> all{{fast_t, fast}, {slow_t, slow}};
  const auto found = series::align_all(all, std::vector<double>{0.01, 0.02});
  REQUIRE(found);
  CHECK(found->time_s == std::vector<double>{1, 2, 3});
  CHECK(found->value[0][0] == Approx(10).epsilon(1e-14));
  CHECK(found->value[1] == std::vector<double>{5, 5, 5});
  CHECK(found->timing_bound[0] == Approx(0.03 * 10).epsilon(1e-12));
  CHECK(found->timing_bound[1] == 0);

  const std::vector<double> later{7, 8};
  const std::vector<series::TimeSeries> apart{{slow_t, slow}, {later, later}};
  CHECK_FALSE(series::align_all(apart, std::vector<double>{0, 0}));
  CHECK_FALSE(series::align_all({}, {}));
  CHECK_FALSE(series::align({slow_t, fast}, slow_t, 0));
}

TEST_CASE("the mean of a product differs from the product of means by no more than the fluctuation bound") {
  // In-phase sines reach the bound: mean(v i) - V I = a b / 2, and each deviation is its amplitude over
  // sqrt 2.
  const double a = 3;
  const double b = 0.2;
  CHECK(series::fluctuation_bound(a / std::numbers::sqrt2, b / std::numbers::sqrt2) ==
        Approx(a * b / 2).epsilon(1e-14));
}
