// The Monte Carlo validation of a level's efficiency against distributions in closed form.
#include "daemon/evaluation/validation.h"

#include <catch2/catch.hpp>

#include "hand_bench.h"

using namespace loadstair;
using namespace loadstair::evaluation;
using namespace loadstair::evaluation_tests;

namespace {

/// DC out, AC in with a power factor that is only known to lie in [low, 1].
HandBench wide_power_factor(double low) {
  HandBench bench = stoat_bench({.reading_percent = 1e-4});
  bench.hookup.ports[0].kind = setup::PortKind::ac;
  bench.hookup.ports[0].power_factor_low = low;
  return bench;
}

}  // namespace

TEST_CASE("several like meters bear the linear interval out") {
  // Twelve rectangular parts, none of which rules: nearly normal. u = eta 0.001 sqrt(4/3) = 1.1e-3, so half a
  // unit of its last digit, 5e-4, is allowed (JCGM 101:2008 7.9.2, 8.1).
  const StepResult step = stoat_bench({.reading_percent = 0.1}).evaluate().steps.at(0);
  REQUIRE(step.validation);
  INFO(step.validation->text);
  CHECK(step.validation->agrees);
  CHECK(step.validation->tolerance == Approx(5e-4));
  CHECK(step.validation->low_difference < 1e-4);
  CHECK(step.validation->high_difference < 1e-4);
  CHECK(step.efficiency.method == "linear");
  CHECK(step.efficiency.k.has_value());
}

TEST_CASE("a power factor that is only known within wide limits has an interval of its own shape") {
  // eta = c/PF with PF rectangular in [0.6, 1]: the density falls with eta, so the shortest 95 % interval
  // begins at PF = 1 and ends where 5 % of the power factors are left: [c, c/0.62]. Linear: c/0.8 (1 +- 1.96
  // 0.144).
  const StepResult step = wide_power_factor(0.6).evaluate().steps.at(0);
  REQUIRE(step.validation);
  INFO(step.validation->text);
  CHECK_FALSE(step.validation->agrees);
  const double c = 38.5 / 39.9;
  CHECK(step.efficiency.method == "monte-carlo");
  CHECK_FALSE(step.efficiency.k);
  CHECK_FALSE(step.efficiency.expanded);
  CHECK(step.efficiency.value == Approx(c / 0.8).epsilon(1e-6));
  CHECK(step.efficiency.low == Approx(c).epsilon(0.01));
  CHECK(step.efficiency.high == Approx(c / 0.62).epsilon(0.01));
}

TEST_CASE("a decision guards with the interval that is reported") {
  HandBench bench = wide_power_factor(0.6);
  const double c = 100.0 * 38.5 / 39.9;
  // 1.04 c is below the value by less than the linear U (0.353 c), and below it by more than Monte Carlo's
  // lower side reaches (0.25 c) only when it is below c.
  const auto decided = [&](double low) {
    bench.stair.limits = {{"efficiency", "efficiency", "%", low, std::nullopt, {}, ""}};
    const RunResult result = bench.evaluate();
    return result.decisions.at(0).decision;
  };
  CHECK(decided(0.95 * c) == "pass");  // the linear interval reaches down to 0.90 c
  CHECK(decided(1.04 * c) == "undecided");
  CHECK(decided(1.64 * c) == "fail");
}

TEST_CASE("the same run validates to the same bits, another seed to others") {
  HandBench bench = wide_power_factor(0.6);
  const StepResult first = bench.evaluate().steps.at(0);
  const StepResult again = bench.evaluate().steps.at(0);
  CHECK(first.efficiency.high == again.efficiency.high);
  bench.run.seed = 7;
  CHECK(first.efficiency.high != bench.evaluate().steps.at(0).efficiency.high);
}

TEST_CASE("what a run's steps may draw falls with their number and keeps to its ends") {
  CHECK(most_draws_of(0) == most_draws_of(1));
  CHECK(most_draws_of(30) * 30 <= 4'000'000);
  CHECK(most_draws_of(1) == 300'000);
  CHECK(most_draws_of(1000) == 100'000);
}
