// How often the electrical criterion lets a slope pass that is not within its limit.
#include <catch2/catch.hpp>
#include <cmath>
#include <vector>

#include "analysis/settling/settling.h"
#include "tests/analysis/random_source.h"

namespace loadstair::settling {
namespace {

/// Of 1000 windows of 60 readings with first-order noise, how many settle.
int settled_of_1000(double slope_per_s, double correlation, double noise, std::uint64_t seed) {
  tests::RandomSource random{seed};
  int settled = 0;
  for (int run = 0; run < 1000; ++run) {
    std::vector<double> time_s, value;
    double wander = random.normal();
    for (int i = 0; i <= 60; ++i) {
      wander = correlation * wander + std::sqrt(1.0 - correlation * correlation) * random.normal();
      time_s.push_back(0.5 * i);
      value.push_back(600.0 + slope_per_s * time_s.back() + noise * wander);
    }
    const auto verdict = settled_by_slope({time_s, value}, {30.0, 0.05, 5});
    REQUIRE(verdict);
    if (verdict->settled) ++settled;
  }
  return settled;
}

TEST_CASE("a slope at its limit settles as rarely as its 95 % interval says") {
  // The whole two-sided interval has to lie within: a slope at the limit passes in 2.5 %. 40 of 1000 is three
  // binomial deviations more. Correlated noise has few independent values; twice that is allowed.
  const int white = settled_of_1000(0.05, 0.0, 0.2, 71);
  const int wandering = settled_of_1000(0.05, 0.7, 0.1, 72);
  WARN("slope at its limit: " << white << " of 1000 settle in white noise, " << wandering
                              << " in wandering noise");
  CHECK(white <= 40);
  CHECK(wandering <= 80);
  // Downwards as upwards.
  CHECK(settled_of_1000(-0.05, 0.0, 0.2, 73) <= 40);
}

TEST_CASE("a slope that noise hides is not settled, and a resolved small one is") {
  // u(slope) of 60 white readings over 30 s: noise/(8.9 s sqrt 61): at 0.2 W 0.0029 W/s, at 20 W 0.29 W/s.
  CHECK(settled_of_1000(0.0, 0.0, 0.2, 74) == 1000);
  CHECK(settled_of_1000(0.0, 0.0, 20.0, 75) == 0);
}

}  // namespace
}  // namespace loadstair::settling
