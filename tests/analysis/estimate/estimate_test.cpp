#include "analysis/estimate/estimate.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <limits>
#include <vector>

#include "analysis/base/require.h"
#include "analysis/estimate/budget.h"
#include "analysis/estimate/coverage.h"

using namespace loadstair;
using estimate::Estimate;

namespace {

estimate::SourcePtr source(const char* key) {
  return estimate::make_type_b(key, key, estimate::Distribution::normal);
}

}  // namespace

TEST_CASE("two estimates of one source are correlated through it, whoever made it") {
  const Estimate a{10, source("gain"), 0.1};
  const Estimate b{20, source("gain"), 0.2};
  CHECK(estimate::correlation(a, b) == Approx(1).epsilon(1e-15));
  CHECK((b / a).standard_uncertainty() == Approx(0).margin(1e-17));
  CHECK((a + b).standard_uncertainty() == Approx(0.3).epsilon(1e-15));
  CHECK((b - 2.0 * a).terms().empty());
  const Estimate c{20, source("other"), 0.2};
  CHECK(estimate::covariance(a, c) == 0);
  CHECK((a + c).standard_uncertainty() == Approx(std::hypot(0.1, 0.2)).epsilon(1e-15));
}

TEST_CASE("arithmetic follows the chain rule in closed form") {
  const Estimate a{3, source("a"), 0.03};
  const Estimate b{4, source("b"), -0.02};
  CHECK((a * b).variance() == Approx(0.03 * 0.03 * 16 + 0.02 * 0.02 * 9).epsilon(1e-15));
  CHECK((a / b).variance() == Approx(0.03 * 0.03 / 16 + 0.02 * 0.02 * 9 / 256).epsilon(1e-14));
  CHECK(estimate::square_root(b).standard_uncertainty() == Approx(0.02 / 4).epsilon(1e-15));
  CHECK(estimate::square(a).standard_uncertainty() == Approx(0.18).epsilon(1e-15));
  CHECK((1.0 / b).standard_uncertainty() == Approx(0.02 / 16).epsilon(1e-15));
  CHECK((5.0 - a).value() == 2);
  CHECK((-a).terms()[0].contribution == -0.03);
  // f = a b^2 by its partial derivatives b^2 and 2 a b, against the same by arithmetic.
  const Estimate by_parts = estimate::combine(48, {{a, 16}, {b, 24}});
  const Estimate by_steps = a * estimate::square(b);
  CHECK(by_parts.value() == by_steps.value());
  CHECK((by_parts - by_steps).standard_uncertainty() == Approx(0).margin(1e-16));
}

TEST_CASE("dividing by zero is a refusal for foreign numbers and a broken promise for our own") {
  CHECK(estimate::ratio(Estimate{1}, Estimate{0}, "efficiency").refusal().text() ==
        "efficiency: its divisor is zero");
  CHECK_FALSE(estimate::ratio(Estimate{1e300}, Estimate{1e-300}, "efficiency"));
  CHECK_THROWS_AS(Estimate{1} / Estimate{0}, base::BrokenPromise);
  CHECK_THROWS_AS(estimate::square_root(Estimate{0}), base::BrokenPromise);
}

TEST_CASE("a bounded value is rectangular between its ends") {
  const Estimate pf = estimate::bounded(0.9, 1, source("pf"));
  CHECK(pf.value() == Approx(0.95).epsilon(1e-15));
  CHECK(pf.standard_uncertainty() == Approx(0.05 / std::sqrt(3)).epsilon(1e-14));
  CHECK(estimate::bounded(1, 0.9, source("pf")).standard_uncertainty() == Approx(pf.standard_uncertainty()));
  CHECK(estimate::bounded(2, 2, source("pf")).terms().empty());
}

TEST_CASE("sources of one sample count once in the effective degrees of freedom") {
  estimate::Source one;
  one.kind = estimate::Kind::type_a;
  one.degrees_of_freedom = 9;
  one.sample = "window";
  one.key = "noise 1";
  estimate::Source two = one;
  two.key = "noise 2";
  const Estimate joint =
      Estimate{0, estimate::make_source(one), 3} + Estimate{0, estimate::make_source(two), 4};
  CHECK(estimate::effective_degrees_of_freedom(joint) == Approx(9).epsilon(1e-14));
  one.sample = two.sample = "";
  const Estimate apart =
      Estimate{0, estimate::make_source(one), 3} + Estimate{0, estimate::make_source(two), 4};
  CHECK(estimate::effective_degrees_of_freedom(apart) == Approx(9 * 625.0 / (81 + 256)).epsilon(1e-14));
  CHECK(std::isinf(estimate::effective_degrees_of_freedom(Estimate{1, source("b"), 1e-90})));
  // Small numbers do not vanish in fourth powers.
  CHECK(estimate::effective_degrees_of_freedom(1e-120 * joint) == Approx(9).epsilon(1e-12));
}

TEST_CASE("an interval is symmetric, k u wide, and of no width for an exact number") {
  const auto interval = estimate::coverage(Estimate{5, source("b"), 0.1});
  CHECK(interval.k == Approx(1.959963984540054).epsilon(1e-12));  // normal quantile, any table
  CHECK(interval.high - 5 == Approx(0.1959963984540054).epsilon(1e-12));
  CHECK(5 - interval.low == Approx(interval.expanded).epsilon(1e-12));
  const auto exact = estimate::coverage(Estimate{5});
  CHECK(exact.low == 5);
  CHECK(exact.high == 5);
}

TEST_CASE("a budget merges sources of one name, sorts by share and words the action") {
  estimate::Source gain;
  gain.key = "meter/V1/gain";
  gain.name = "V1 on 600 V: gain";
  gain.remedy = estimate::Remedy::tie_check;
  gain.variance_left = 0;
  estimate::Source gain_run = gain;
  gain_run.key = "meter/V1/gain/run/7";
  gain_run.variance_left = 1;
  const Estimate a = Estimate{100, estimate::make_source(gain), -0.4} +
                     Estimate{0, estimate::make_source(gain_run), 0.3} + Estimate{0, source("small"), 0.1};
  const auto found = estimate::budget(a);
  REQUIRE(found.lines.size() == 2);
  CHECK(found.lines[0].name == "V1 on 600 V: gain");
  CHECK(found.lines[0].standard_uncertainty == Approx(0.5).epsilon(1e-14));
  CHECK(found.lines[0].contribution == -0.4);
  CHECK(found.lines[0].share == Approx(0.25 / 0.26).epsilon(1e-14));
  CHECK(found.lines[0].share + found.lines[1].share == Approx(1).epsilon(1e-15));
  CHECK(found.lines[0].action.find("tie check") == 0);
  REQUIRE(found.lines[0].expanded_if_done);
  CHECK(*found.lines[0].expanded_if_done == Approx(1.959963984540054 * std::sqrt(0.1)).epsilon(1e-12));
  CHECK(found.lines[1].action.empty());
  CHECK_FALSE(found.lines[1].expanded_if_done);
  CHECK(estimate::budget(Estimate{1}).lines.empty());
}

TEST_CASE("keys keep their parts apart") {
  CHECK(estimate::key::meter({"a/b", "c", "d"}, "gain") != estimate::key::meter({"a", "b/c", "d"}, "gain"));
  CHECK(estimate::key::meter({"a", "", "d"}, "gain") != estimate::key::meter({"a", "d", ""}, "gain"));
  CHECK(estimate::key::component("A1", "resistance") == "component/A1/resistance");
}
