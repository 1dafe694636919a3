#include "analysis/estimate/type_a.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <vector>

#include "analysis/estimate/coverage.h"
#include "analysis/series/statistics.h"
#include "tests/analysis/random_source.h"

using namespace loadstair;
using estimate::Estimate;

namespace {

series::SteadyWindow window_of(const std::vector<double>& t, const std::vector<double>& y) {
  const auto found = series::steady_window({t, y});
  REQUIRE(found);
  return *found;
}

}  // namespace

TEST_CASE("quantities of one window have the variances and covariances of their readings") {
  const auto seed = tests::seed_of_tests();
  INFO("LOADSTAIR_SEED=" << seed);
  tests::RandomSource random{seed};
  std::vector<double> t;
  std::vector<double> a;
  std::vector<double> b;
  std::vector<double> difference;
  for (int i = 0; i < 200; ++i) {
    t.push_back(0.1 * i);
    a.push_back(10 + random.normal());
    b.push_back(5 + 0.8 * (a.back() - 10) + 0.3 * random.normal());
    difference.push_back(a.back() - b.back());
  }
  const std::vector<series::SteadyWindow> windows{window_of(t, a), window_of(t, b), window_of(t, difference)};
  const auto found = estimate::type_a_estimates(windows, {"run", "step"});
  REQUIRE(found);
  const auto noise_only = [](const Estimate& e) {
    return e.filtered([](const estimate::Source& s) { return s.kind == estimate::Kind::type_a; });
  };
  for (std::size_t i = 0; i < 3; ++i) {
    CHECK((*found)[i].value() == windows[i].value);
    CHECK(noise_only((*found)[i]).standard_uncertainty() == Approx(windows[i].u).epsilon(1e-9));
    for (std::size_t j = 0; j < i; ++j) {
      const double r = series::correlation_of_residuals(windows[i].residual, windows[j].residual);
      CHECK(estimate::correlation(noise_only((*found)[i]), noise_only((*found)[j])) ==
            Approx(r).epsilon(1e-9));
    }
    CHECK(estimate::effective_degrees_of_freedom(noise_only((*found)[i])) >= 19);
  }
}

TEST_CASE("a drift common to two quantities drops out of their ratio") {
  std::vector<double> t;
  std::vector<double> in;
  std::vector<double> out;
  for (int i = 0; i < 60; ++i) {
    t.push_back(i);
    in.push_back(100 + 0.05 * i);
    out.push_back(0.95 * in.back());
  }
  const std::vector<series::SteadyWindow> windows{window_of(t, in), window_of(t, out)};
  const auto found = estimate::type_a_estimates(windows, {"run", "step"});
  REQUIRE(found);
  CHECK((*found)[0].standard_uncertainty() == Approx(0.05 * 59 / std::sqrt(12)).epsilon(1e-6));
  CHECK(((*found)[1] / (*found)[0]).standard_uncertainty() == Approx(0).margin(1e-9));
}

TEST_CASE("two typed readings become a bound of their own, one reading a refusal") {
  const std::vector<double> t{0, 5};
  const auto found =
      estimate::type_a_estimate(window_of(t, {12.0, 12.06}), {"run", "step"}, "output voltage");
  REQUIRE(found);
  CHECK(found->value() == Approx(12.03).epsilon(1e-14));
  CHECK(found->standard_uncertainty() == Approx(0.03 / std::sqrt(3)).epsilon(1e-12));
  CHECK(std::isinf(estimate::effective_degrees_of_freedom(*found)));
  CHECK_FALSE(estimate::type_a_estimate(window_of({0}, {12.0}), {"run", "step"}, "output voltage"));
}

TEST_CASE("windows of other instants and sets of one observation are refused") {
  const std::vector<series::SteadyWindow> windows{window_of({0, 1, 2}, {1, 2, 1}), window_of({0, 1}, {1, 2})};
  const auto found = estimate::type_a_estimates(windows, {"run", "step 3"});
  REQUIRE_FALSE(found);
  CHECK(found.refusal().place == "step 3, quantity 2");
  const std::vector<double> single{1};
  const std::vector<std::span<const double>> sets{single};
  CHECK_FALSE(estimate::repeated_observations(sets, {"run", "step"}));
}
