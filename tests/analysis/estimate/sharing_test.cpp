#include "analysis/estimate/sharing.h"

#include <array>
#include <catch2/catch.hpp>
#include <cmath>

#include "tests/analysis/random_source.h"

using namespace loadstair;
using estimate::Estimate;
using estimate::MeterRange;
using estimate::Scope;

namespace {

estimate::SourcePtr with_key(const std::string& key) {
  return estimate::make_type_b(key, key, estimate::Distribution::normal);
}

}  // namespace

TEST_CASE("a source's scope is read off its key, whatever its parts hold") {
  const estimate::Owner meter{"V/1 run", "dc voltage", "600\\ V/level"};
  CHECK(estimate::scope_of(*with_key(estimate::key::meter(meter, "gain"))) == Scope::fixed);
  CHECK(estimate::scope_of(*with_key(estimate::key::meter_in_run(meter, "gain", "r/1"))) == Scope::per_run);
  CHECK(estimate::scope_of(*with_key(estimate::key::meter_at_level(meter, "linearity", "r", "s/level/2"))) ==
        Scope::per_level);
  CHECK(estimate::scope_of(*with_key(estimate::key::component("S1", "tolerance"))) == Scope::fixed);
  CHECK(estimate::scope_of(*with_key(estimate::key::window("r", "s", "noise 0"))) == Scope::other);
  CHECK(estimate::scope_of(*with_key("something else")) == Scope::other);
  CHECK(estimate::scope_of(*with_key("")) == Scope::other);
  CHECK(estimate::meter_part_of(*with_key(estimate::key::meter_in_run(meter, "offset", "r"))) == "offset");
  CHECK(estimate::meter_part_of(*with_key(estimate::key::component("S1", "gain"))).empty());
}

TEST_CASE("the shares of a reading's variance are the shares it was made with") {
  const MeterRange meter{{"V1", "dc voltage", "60 V"}, 60, 0, estimate::AccuracySpec{0.1, 0.05, 0}};
  const auto reading = estimate::with_meter_error(48, meter, {"r", "s"}, {0.6, 0.25, 0.15});
  REQUIRE(reading);
  auto shares = estimate::scope_shares(*reading);
  CHECK(shares.fixed == Approx(0.6).epsilon(1e-12));
  CHECK(shares.per_run == Approx(0.25).epsilon(1e-12));
  CHECK(shares.per_level == Approx(0.15).epsilon(1e-12));
  CHECK(shares.other == 0);
  // Noise of the same size as the meter's error takes half of everything.
  const Estimate noisy = *reading + Estimate{0, with_key(estimate::key::window("r", "s", "noise")),
                                             reading->standard_uncertainty()};
  shares = estimate::scope_shares(noisy);
  CHECK(shares.fixed == Approx(0.3).epsilon(1e-12));
  CHECK(shares.unshared() == Approx(0.7).epsilon(1e-12));
  CHECK(estimate::scope_shares(Estimate{3}).fixed == 0);
  // The fixed part alone is what another run has in common: the correlation of two runs.
  const auto later = estimate::with_meter_error(48, meter, {"r2", "s"}, {0.6, 0.25, 0.15});
  REQUIRE(later);
  CHECK(estimate::correlation(*reading, *later) == Approx(0.6).epsilon(1e-12));
}

TEST_CASE("a 24-hour figure gives the unshared share as its variance over the full one") {
  const MeterRange meter{{"V1", "dc voltage", "60 V"}, 60, 0.01, estimate::AccuracySpec{0.1, 0.05, 0}};
  // At 60 V: full (0.06, 0.03) V, 24 hours (0.024, 0.012) V: ratio 0.4, share 0.16.
  auto shares = estimate::shares_from_repeatability(60, meter, {0.04, 0.02, 0});
  REQUIRE(shares);
  CHECK(shares->fixed == Approx(0.84).epsilon(1e-12));
  CHECK(shares->per_run == Approx(0.08).epsilon(1e-12));
  CHECK(shares->per_level == Approx(0.08).epsilon(1e-12));
  // Worse than the full figure: nothing is shared, and no share is below zero.
  shares = estimate::shares_from_repeatability(60, meter, {0.4, 0.02, 0});
  REQUIRE(shares);
  CHECK(shares->fixed == 0);
  CHECK(shares->per_run + shares->per_level == Approx(1));
  // They can be used as they are.
  CHECK(estimate::with_meter_error(60, meter, {"r", "s"}, *shares));
  MeterRange undeclared = meter;
  undeclared.accuracy.reset();
  CHECK_FALSE(estimate::shares_from_repeatability(60, undeclared, {0.04, 0, 0}));
  CHECK_FALSE(estimate::shares_from_repeatability(60, meter, {-0.04, 0, 0}));
  MeterRange perfect = meter;
  perfect.accuracy = estimate::AccuracySpec{};
  CHECK_FALSE(estimate::shares_from_repeatability(60, perfect, {0.04, 0, 0}));
}

TEST_CASE("ties of several runs give the per-run share, on the careful side") {
  // Five ratios with standard deviation 1e-4 about 2e-4: squares = 4e-8.
  const std::array<double, 5> ratios{1e-4, 1e-4, 2e-4, 3e-4, 3e-4};
  const double u = 1e-3;
  const auto shares = estimate::shares_from_ties(ratios, u, u);
  REQUIRE(shares);
  // R: qchisq(pnorm(-1), 4) = 1.416 (to three digits by any table of chi-squared at 0.159).
  CHECK(shares->per_run == Approx(4e-8 / 1.416 / (2 * u * u)).epsilon(0.002));
  CHECK(shares->per_level == 0.1);
  CHECK(shares->fixed + shares->per_run + shares->per_level == Approx(1).epsilon(1e-15));
  // A spread beyond the specification: all that is not per level.
  const std::array<double, 3> wild{-0.1, 0, 0.1};
  const auto all = estimate::shares_from_ties(wild, u, u);
  REQUIRE(all);
  CHECK(all->fixed == Approx(0).margin(1e-15));
  CHECK(all->per_run == Approx(0.9));
  CHECK_FALSE(estimate::shares_from_ties(std::span{ratios}.first(2), u, u));
  CHECK_FALSE(estimate::shares_from_ties(ratios, 0, 0));
}

TEST_CASE("by simulation the per-run share found from five ties is rarely too small") {
  // The true share is 0.2 for both meters. The bound is meant to hold at 84 %; 400 trials, five deviations.
  tests::RandomSource random{tests::seed_of_tests()};
  constexpr double kU = 1e-3;
  int enough = 0;
  for (int trial = 0; trial < 400; ++trial) {
    std::array<double, 5> ratios{};
    for (double& ratio : ratios) {
      ratio = kU * std::sqrt(0.2) * (random.normal() + random.normal());
    }
    const auto shares = estimate::shares_from_ties(ratios, kU, kU);
    REQUIRE(shares);
    if (shares->per_run >= 0.2) ++enough;
  }
  CHECK(enough > 400 * 0.8413 - 5 * std::sqrt(400 * 0.8413 * 0.1587));
  CHECK(enough < 400 * 0.8413 + 5 * std::sqrt(400 * 0.8413 * 0.1587));
}

TEST_CASE("what an adjustment in between leaves is new for the run") {
  const auto shares = estimate::without_fixed({0.7, 0.2, 0.1});
  CHECK(shares.fixed == 0);
  CHECK(shares.per_run == Approx(0.9));
  CHECK(shares.per_level == 0.1);
}
