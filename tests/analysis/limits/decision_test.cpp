#include <catch2/catch.hpp>
#include <cmath>
#include <limits>
#include <numbers>
#include <vector>

#include "analysis/estimate/estimate.h"
#include "analysis/limits/limits.h"
#include "tests/analysis/random_source.h"

using namespace loadstair;
using estimate::Estimate;
using limits::Tolerance;
using limits::Verdict;

namespace {

estimate::Coverage normal(double value, double u) {
  return estimate::coverage(
      Estimate{value, estimate::make_type_b("x", "x", estimate::Distribution::normal), u});
}

limits::Decision decided(const estimate::Coverage& result, const Tolerance& tolerance,
                         const limits::Rule& rule = {}, std::span<const double> draws = {}) {
  auto out = limits::decide(result, tolerance, "%", rule, draws);
  REQUIRE(out);
  return *std::move(out);
}

}  // namespace

TEST_CASE("pass, undecided and fail lie along the value as the guard band says, for either side") {
  // U = 1.96: upper limit 10: pass to 8.04, fail from 11.96.
  const Tolerance upper{std::nullopt, 10.0};
  CHECK(decided(normal(8.03, 1), upper).verdict == Verdict::pass);
  CHECK(decided(normal(8.05, 1), upper).verdict == Verdict::undecided);
  CHECK(decided(normal(10, 1), upper).verdict == Verdict::undecided);
  CHECK(decided(normal(11.95, 1), upper).verdict == Verdict::undecided);
  CHECK(decided(normal(11.97, 1), upper).verdict == Verdict::fail);
  const Tolerance lower{10.0, std::nullopt};
  CHECK(decided(normal(11.97, 1), lower).verdict == Verdict::pass);
  CHECK(decided(normal(11.95, 1), lower).verdict == Verdict::undecided);
  CHECK(decided(normal(8.05, 1), lower).verdict == Verdict::undecided);
  CHECK(decided(normal(8.03, 1), lower).verdict == Verdict::fail);
  // Half the guard band, half the zone.
  CHECK(decided(normal(8.05, 1), upper, {0.5}).verdict == Verdict::pass);
  CHECK(decided(normal(9.03, 1), upper, {0.5}).verdict == Verdict::undecided);
}

TEST_CASE("simple acceptance decides by the value alone, and the limit itself is allowed") {
  const Tolerance both{9.0, 10.0};
  CHECK(decided(normal(10, 1), both, {0}).verdict == Verdict::pass);
  CHECK(decided(normal(9, 1), both, {0}).verdict == Verdict::pass);
  CHECK(decided(normal(10.0001, 1), both, {0}).verdict == Verdict::fail);
  CHECK(decided(normal(8.9999, 1), both, {0}).verdict == Verdict::fail);
  // So does an exact result.
  CHECK(decided(estimate::coverage(Estimate{10}), both).verdict == Verdict::pass);
  CHECK(decided(estimate::coverage(Estimate{10.0001}), both).verdict == Verdict::fail);
  CHECK(decided(estimate::coverage(Estimate{10}), both).conforming_probability == 1);
  CHECK(decided(estimate::coverage(Estimate{10.0001}), both).conforming_probability == 0);
}

TEST_CASE("a tolerance narrower than the interval accepts nothing") {
  const auto found = decided(normal(9.5, 1), {9.0, 10.0});
  CHECK(found.verdict == Verdict::undecided);
  CHECK(*found.acceptance.low > *found.acceptance.high);
}

TEST_CASE(
    "the probability is Student's with few degrees of freedom, and the draws' share where there are any") {
  // nu = 1 is Cauchy's: P(T <= 1) = 3/4; nu = 2: P(T <= sqrt 2) = 1/2 + 1/(2 sqrt 2). Closed forms.
  const auto cauchy = estimate::coverage(Estimate{9, estimate::make_type_a("n", "n", 1), 1});
  CHECK(decided(cauchy, {std::nullopt, 10.0}).conforming_probability == Approx(0.75).epsilon(1e-12));
  const auto two = estimate::coverage(Estimate{0, estimate::make_type_a("n", "n", 2), 1});
  CHECK(decided(two, {std::nullopt, std::numbers::sqrt2}).conforming_probability ==
        Approx(0.5 + 0.5 * std::sqrt(0.5)).epsilon(1e-12));
  CHECK(decided(two, {-std::numbers::sqrt2, std::numbers::sqrt2}).conforming_probability ==
        Approx(std::sqrt(0.5)).epsilon(1e-12));
  const std::vector<double> draws{9.9, 10.1, 8.9, 9.5, 10, 9, 11, 12};
  CHECK(decided(normal(9.5, 1), {9.0, 10.0}, {}, draws).conforming_probability == 0.5);
}

TEST_CASE("an interval by Monte Carlo guards with its own two sides") {
  estimate::Coverage skewed;
  skewed.value = 2;
  skewed.low = 1.9;
  skewed.high = 3;
  skewed.standard_uncertainty = 0.3;
  skewed.degrees_of_freedom = std::numeric_limits<double>::infinity();
  skewed.method = estimate::CoverageMethod::monte_carlo;
  CHECK(decided(skewed, {std::nullopt, 3.01}).verdict == Verdict::pass);
  CHECK(decided(skewed, {std::nullopt, 2.99}).verdict == Verdict::undecided);
  CHECK(decided(skewed, {1.89, std::nullopt}).verdict == Verdict::pass);
  CHECK(decided(skewed, {std::nullopt, 1.89}).verdict == Verdict::fail);
  CHECK(decided(skewed, {std::nullopt, 1.91}).verdict == Verdict::undecided);
}

TEST_CASE("by simulation hardly a bad item passes and hardly a good one fails") {
  // Items on the limit itself, the worst case: guarded acceptance passes and fails 2.5 % each. 4000 trials,
  // five deviations.
  tests::RandomSource random{tests::seed_of_tests()};
  int passed = 0;
  int failed = 0;
  constexpr int kTrials = 4000;
  for (int i = 0; i < kTrials; ++i) {
    const auto verdict = decided(normal(10 + 0.2 * random.normal(), 0.2), {std::nullopt, 10.0}).verdict;
    passed += verdict == Verdict::pass ? 1 : 0;
    failed += verdict == Verdict::fail ? 1 : 0;
  }
  const double spread = 5 * std::sqrt(kTrials * 0.025 * 0.975);
  CHECK(passed == Approx(kTrials * 0.025).margin(spread));
  CHECK(failed == Approx(kTrials * 0.025).margin(spread));
}

TEST_CASE("a lower bound fails beyond an upper limit and passes none") {
  const auto fails = limits::decide_lower_bound(3.2, {std::nullopt, 3.0}, "");
  REQUIRE(fails);
  CHECK(fails->verdict == Verdict::fail);
  const auto open = limits::decide_lower_bound(2.8, {std::nullopt, 3.0}, "");
  REQUIRE(open);
  CHECK(open->verdict == Verdict::undecided);
  CHECK(open->text == "undecided: at least 2.8, allowed at most 3; only a lower bound is known");
}

TEST_CASE("a decision reads as a sentence with its numbers") {
  const auto found = limits::decide(limits::Limit{"efficiency", 92, std::nullopt, "%"}, normal(93.127, 0.21));
  REQUIRE(found);
  CHECK(found->text ==
        "efficiency: pass: 93.13 %, 95 % interval 92.72 % to 93.54 %, allowed at least 92 %, guard band 1 U; "
        "probability of conformity above 99.9 %");
  CHECK(limits::decide(limits::Limit{"THD", std::nullopt, 5, "%"}, normal(5.1, 0.2), {0})->text ==
        "THD: fail: 5.10 %, 95 % interval 4.71 % to 5.49 %, allowed at most 5 %, simple acceptance without a "
        "guard band; probability of conformity 30.9 %");
}

TEST_CASE("what cannot be decided is refused") {
  CHECK_FALSE(limits::decide(normal(1, 1), {}, ""));
  CHECK_FALSE(limits::decide(normal(1, 1), {2.0, 1.0}, ""));
  CHECK_FALSE(limits::decide(normal(1, 1), {std::nan(""), 1.0}, ""));
  CHECK_FALSE(limits::decide(normal(std::nan(""), 1), {std::nullopt, 1.0}, ""));
  CHECK_FALSE(limits::decide(normal(1, 1), {std::nullopt, 1.0}, "", {-1}));
  const auto named = limits::decide(limits::Limit{"ripple", std::nullopt, std::nullopt, "V"}, normal(1, 1));
  REQUIRE_FALSE(named);
  CHECK(named.refusal().text() == "limit of ripple: no limit is given");
}
