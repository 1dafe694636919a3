#include "analysis/series/steady_window.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <vector>

#include "analysis/series/correlation.h"
#include "analysis/series/line.h"
#include "tests/analysis/random_source.h"

using namespace loadstair;

namespace {

std::vector<double> instants(std::size_t count, double interval_s) {
  std::vector<double> out;
  for (std::size_t i = 0; i < count; ++i) out.push_back(1000 + interval_s * static_cast<double>(i));
  return out;
}

/// First-order autoregressive noise of variance 1.
std::vector<double> correlated_noise(tests::RandomSource& random, std::size_t count, double phi) {
  std::vector<double> out{random.normal()};
  while (out.size() < count) out.push_back(phi * out.back() + std::sqrt(1 - phi * phi) * random.normal());
  return out;
}

}  // namespace

TEST_CASE("a line is found exactly, whatever its origin in time") {
  const auto t = instants(7, 0.5);
  std::vector<double> y;
  for (const double at : t) y.push_back(12.5 - 0.25 * (at - 1001.5));
  const auto line = series::fit_line({t, y});
  REQUIRE(line);
  CHECK(line->middle_s == 1001.5);
  CHECK(line->at_middle == Approx(12.5).epsilon(1e-15));
  CHECK(line->slope_per_s == Approx(-0.25).epsilon(1e-14));
  CHECK(line->residual_deviation == Approx(0).margin(1e-14));
  CHECK(line->duration_s == 3);
}

TEST_CASE("a line refuses disorder by the number of the reading") {
  const std::vector<double> t{1, 3, 2};
  const std::vector<double> y{1, 1, 1};
  const auto found = series::fit_line({t, y});
  REQUIRE_FALSE(found);
  CHECK(found.refusal().place == "reading 3");
  const std::vector<double> same{2, 2, 2};
  const auto flat = series::fit_line({same, y});
  REQUIRE(flat);
  CHECK(flat->slope_per_s == 0);
  CHECK(flat->at_middle == 1);
  CHECK_FALSE(series::fit_line({t, std::vector<double>{1, 2}}));
  CHECK_FALSE(series::fit_line({{}, {}}));
}

TEST_CASE("the integrated correlation of autoregressive noise is (1 + phi)/(1 - phi)") {
  // Closed form for AR(1) (Priestley 1981, 5.3). 50 000 values leave about 4 % of scatter in g for phi up to
  // 0.9.
  const auto seed = tests::seed_of_tests();
  INFO("LOADSTAIR_SEED=" << seed);
  tests::RandomSource random{seed};
  for (const double phi : {0.0, 0.5, 0.9}) {
    INFO(phi);
    const auto noise = correlated_noise(random, 50000, phi);
    const auto found = series::integrated_correlation(noise);
    CHECK(found.inefficiency == Approx((1 + phi) / (1 - phi)).epsilon(0.2));
    CHECK(found.effective_count == Approx(50000 / found.inefficiency).epsilon(1e-12));
  }
  // Alternating values are not credited with more than their number.
  std::vector<double> alternating;
  for (int i = 0; i < 100; ++i) alternating.push_back(i % 2 == 0 ? 1 : -1);
  CHECK(series::integrated_correlation(alternating).inefficiency == 1);
  CHECK(series::integrated_correlation({}).effective_count == 0);
  CHECK(series::integrated_correlation(std::vector<double>(50, 0.0)).effective_count == 50);
}

TEST_CASE("Type A of a window holds the level in 95 % of windows, correlated or not") {
  // 1000 windows: the share that holds scatters by 0.7 % at 95 %; the band below is 4 such deviations wide on
  // the upper side and leaves a further 3 % below for N_eff being estimated. False alarm below 1e-4.
  const auto seed = tests::seed_of_tests();
  INFO("LOADSTAIR_SEED=" << seed);
  tests::RandomSource random{seed};
  const auto t = instants(600, 0.1);
  for (const double phi : {0.0, 0.8}) {
    int held = 0;
    const int windows = 1000;
    for (int i = 0; i < windows; ++i) {
      auto y = correlated_noise(random, t.size(), phi);
      for (std::size_t k = 0; k < y.size(); ++k) y[k] += 50 + 0.02 * (t[k] - 1029.95);
      const auto window = series::steady_window({t, y});
      REQUIRE(window);
      REQUIRE_FALSE(window->too_short);
      // 2.0: Student's t at 60 degrees of freedom and more.
      if (std::abs(window->value - 50) <= 2.0 * window->u) ++held;
    }
    INFO("phi " << phi << " held " << held);
    CHECK(held >= 920);
    CHECK(held <= 980);
  }
}

TEST_CASE("drift of a window is its slope over the window, as a rectangular error of the middle") {
  const auto t = instants(41, 0.5);
  std::vector<double> y;
  for (std::size_t i = 0; i < t.size(); ++i)
    y.push_back(100 - 0.3 * (t[i] - 1010) + (i % 2 == 0 ? 0.01 : -0.01));
  const auto window = series::steady_window({t, y});
  REQUIRE(window);
  CHECK(window->value == Approx(100).margin(0.001));
  CHECK(window->drift_u == Approx(-0.3 * 20 / std::sqrt(12)).epsilon(1e-3));
  // u^2 = sum r^2/(N (N_eff - 1)) with r of 0.01 and N_eff = N = 41: closed form.
  CHECK(window->u == Approx(0.01 / std::sqrt(40)).epsilon(0.01));
  CHECK(window->degrees_of_freedom == Approx(40));
  CHECK(window->correlation_time_s == Approx(0.5));
}

TEST_CASE("a declared filter lengthens the correlation time and can make a window too short") {
  const auto seed = tests::seed_of_tests();
  tests::RandomSource random{seed};
  const auto t = instants(201, 0.1);
  const auto y = correlated_noise(random, t.size(), 0);
  const auto free = series::steady_window({t, y});
  const auto filtered = series::steady_window({t, y}, {0.5, std::nullopt});
  const auto slow = series::steady_window({t, y}, {0.5, 2.0});
  REQUIRE(free);
  REQUIRE(filtered);
  REQUIRE(slow);
  CHECK(filtered->effective_count == Approx(201 * 0.1 / 0.5).epsilon(1e-9));
  CHECK(filtered->u > free->u);
  CHECK(slow->too_short);
  CHECK(slow->u == 0);
  REQUIRE(slow->bound);
  CHECK(*slow->bound > 2);  // the largest of 201 normal deviations
}

TEST_CASE("a few readings give a bound, a single one none") {
  const std::vector<double> t{0, 10};
  const auto two = series::steady_window({t, std::vector<double>{12.03, 12.05}});
  REQUIRE(two);
  CHECK(two->too_short);
  CHECK(two->value == Approx(12.04).epsilon(1e-15));
  REQUIRE(two->bound);
  CHECK(*two->bound == Approx(0.01).epsilon(1e-12));
  CHECK(two->drift_u == 0);
  const auto one = series::steady_window({std::vector<double>{0}, std::vector<double>{12.03}});
  REQUIRE(one);
  CHECK(one->too_short);
  CHECK_FALSE(one->bound);
  CHECK(one->value == 12.03);
  const auto nineteen = series::steady_window({instants(19, 1), std::vector<double>(19, 5.0)});
  REQUIRE(nineteen);
  CHECK(nineteen->too_short);
  const auto twenty = series::steady_window({instants(20, 1), std::vector<double>(20, 5.0)});
  REQUIRE(twenty);
  CHECK_FALSE(twenty->too_short);
}

TEST_CASE("the correlation time of the whole steady stretch counts where it is the larger one") {
  // First-order noise with r = 0.9: g = (1 + r)/(1 - r) = 19 (closed form), read once a second.
  tests::RandomSource random{tests::seed_of_tests() + 40};
  constexpr int kWindow = 500;
  constexpr int kRuns = 300;
  int alone = 0;
  int with_stretch = 0;
  for (int run = 0; run < kRuns; ++run) {
    std::vector<double> time_s, value;
    double noise = random.normal();
    for (int i = 0; i < 4 * kWindow; ++i) {
      noise = 0.9 * noise + std::sqrt(1 - 0.81) * random.normal();
      time_s.push_back(i);
      value.push_back(noise);
    }
    const auto stretch = series::steady_window({time_s, value});
    REQUIRE(stretch);
    const series::TimeSeries last{std::span{time_s}.last(kWindow), std::span{value}.last(kWindow)};
    const auto own = series::steady_window(last);
    const auto both = series::steady_window(last, {0, stretch->correlation_time_s});
    REQUIRE(own);
    REQUIRE(both);
    CHECK(both->correlation_time_s ==
          Approx(std::max(own->correlation_time_s, stretch->correlation_time_s)).epsilon(1e-12));
    CHECK(both->effective_count <= own->effective_count);
    // Fewer than 20 correlation times claim no deviation; the bound then has to hold.
    const auto holds = [](const series::SteadyWindow& window) {
      const double reach =
          window.too_short ? *window.bound : window.u * (1.96 + 2.4 / window.degrees_of_freedom);
      return std::abs(window.value) <= reach;
    };
    if (holds(*own)) ++alone;
    if (holds(*both)) ++with_stretch;
  }
  WARN("mean of a window of 26 correlation times: " << alone << " of " << kRuns
                                                    << " hold by the window alone, " << with_stretch
                                                    << " with the stretch's time");
  CHECK(with_stretch >= alone);
  // 95 % less three binomial deviations.
  CHECK(with_stretch >= 273);
}
