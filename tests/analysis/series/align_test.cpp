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

TEST_CASE("a meter 0.8 s late on a ramp is aligned; left where it was asked, it would be off by the ramp") {
  // A ramp of 2 W/s. The prompt meter is asked every 0.5 s, the late one every 0.7 s, and shows what was
  // there 0.8 s before: its instants are the askings less the delay.
  const auto ramp = [](double t) { return 100 + 2 * t; };
  std::vector<double> prompt_t, prompt, asked_t, late_t, late;
  for (int i = 0; i <= 80; ++i) {
    prompt_t.push_back(0.5 * i);
    prompt.push_back(ramp(prompt_t.back()));
  }
  for (int i = 2; i <= 57; ++i) {
    asked_t.push_back(0.7 * i);
    late_t.push_back(asked_t.back() - 0.8);
    late.push_back(ramp(late_t.back()));
  }
  const std::vector<double> half_width{0.0, 0.4};
  const std::vector<series::TimeSeries> aligned_both{{prompt_t, prompt}, {late_t, late}};
  const auto good = series::align_all(aligned_both, half_width);
  REQUIRE(good);
  REQUIRE(good->time_s.size() >= 50);
  for (std::size_t i = 0; i < good->time_s.size(); ++i)
    CHECK(good->value[0][i] == Approx(good->value[1][i]).epsilon(1e-13));
  // The late meter is the slower one and gives the instants; what they are known to, 0.4 s, times the slope is
  // the doubt of the other. A ramp has no curvature.
  CHECK(good->timing_bound[0] == Approx(0.4 * 2).epsilon(1e-9));
  CHECK(good->curvature_bound[0] == Approx(0).margin(1e-9));

  const std::vector<series::TimeSeries> as_asked{{prompt_t, prompt}, {asked_t, late}};
  const auto bad = series::align_all(as_asked, half_width);
  REQUIRE(bad);
  for (std::size_t i = 0; i < bad->time_s.size(); ++i)
    CHECK(bad->value[0][i] - bad->value[1][i] == Approx(1.6).epsilon(1e-9));
}
