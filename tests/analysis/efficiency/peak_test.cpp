#include "analysis/efficiency/peak.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <iostream>
#include <vector>

#include "tests/analysis/random_source.h"

using namespace loadstair;
using efficiency::CurvePoint;
using efficiency::LossModel;
using estimate::Estimate;

namespace {

LossModel model_of(double p0, double u0, double p1, double u1, double p2, double u2) {
  const auto with = [](double value, const char* key, double u) {
    return Estimate{value, estimate::make_type_b(key, key, estimate::Distribution::normal), u};
  };
  LossModel out;
  out.p0 = with(p0, "p0", u0);
  out.p1 = with(p1, "p1", u1);
  out.p2 = with(p2, "p2", u2);
  out.least_w = 30;
  out.greatest_w = 600;
  return out;
}

}  // namespace

TEST_CASE("the peak of a loss model, and its greatest efficiency") {
  // p* = sqrt(p0/p2), eta* = 1/(1 + p1 + 2 sqrt(p0 p2)), by calculus; and by search.
  const auto peak = efficiency::peak_of(model_of(2.4, 1e-6, 0.008, 1e-9, 3e-5, 1e-12));
  REQUIRE(peak);
  CHECK(peak->power.value() == Approx(std::sqrt(2.4 / 3e-5)).epsilon(1e-12));
  double best = 0;
  for (double p = 30; p < 600; p += 0.001) best = std::max(best, p / (p + 2.4 + p * (0.008 + p * 3e-5)));
  CHECK(peak->efficiency.value() == Approx(best).epsilon(1e-10));
  CHECK(peak->with_peak == 1);
  CHECK(peak->remarks.empty());
}

// p0 alone uncertain: sqrt is monotonic, so its quantiles are those of p0 under the root.
TEST_CASE("the interval of the peak's power is not the linear one") {
  const double p2 = 3e-5;
  const auto peak = efficiency::peak_of(model_of(2.4, 0.9, 0.008, 0, p2, 0), 400'000);
  REQUIRE(peak);
  // Normal quantile, JCGM 100:2008 table G.2.
  const double low = std::sqrt((2.4 - 1.959964 * 0.9) / p2);
  const double high = std::sqrt((2.4 + 1.959964 * 0.9) / p2);
  CHECK(peak->power_interval.low == Approx(low).epsilon(0.01));
  CHECK(peak->power_interval.high == Approx(high).epsilon(0.003));
  CHECK(peak->power_interval.method == estimate::CoverageMethod::monte_carlo);
  const double linear_low = peak->power.value() - 1.959964 * peak->power.standard_uncertainty();
  CHECK(std::abs(linear_low - low) > 10);
  CHECK(peak->efficiency_interval.low ==
        Approx(1 / (1.008 + 2 * std::sqrt((2.4 + 1.959964 * 0.9) * p2))).epsilon(1e-4));
  CHECK(peak->efficiency_interval.high ==
        Approx(1 / (1.008 + 2 * std::sqrt((2.4 - 1.959964 * 0.9) * p2))).epsilon(1e-4));
}

TEST_CASE("a peak that the coefficients do not resolve is refused") {
  // Normal: below zero with 2.5 % at 1.96 u. Just resolved, and just not.
  const auto resolved = efficiency::peak_of(model_of(2.4, 2.4 / 2.05, 0.008, 0, 3e-5, 0));
  REQUIRE(resolved);
  CHECK(resolved->with_peak == Approx(0.9798).margin(0.002));
  CHECK(std::isfinite(resolved->power_interval.low));
  CHECK(resolved->power_interval.low > 0);
  CHECK(resolved->remarks.empty());
  // The lower quantile lies at 28 W, below the measured 30 W.
  const auto beyond = efficiency::peak_of(model_of(2.4, 2.4 / 1.98, 0.008, 0, 3e-5, 0), 400'000);
  REQUIRE(beyond);
  REQUIRE(beyond->remarks.size() == 1);
  CHECK(beyond->remarks[0].find("reaches beyond the measured span") != std::string::npos);
  const auto not_resolved = efficiency::peak_of(model_of(2.4, 2.4 / 1.8, 0.008, 0, 3e-5, 0));
  REQUIRE_FALSE(not_resolved);
  CHECK(not_resolved.refusal().reason.find("constant and quadratic loss are not resolved") == 0);
  const auto quadratic = efficiency::peak_of(model_of(2.4, 0, 0.008, 0, 3e-5, 3e-5 / 1.5));
  REQUIRE_FALSE(quadratic);
  CHECK_FALSE(efficiency::peak_of(model_of(-1, 0.1, 0.008, 0, 3e-5, 0)));
  CHECK_FALSE(efficiency::peak_of(model_of(2.4, 0.1, 0.008, 0, 0, 0)));
  // sqrt(24/3e-5) = 894 W lies beyond 600 W.
  CHECK_FALSE(efficiency::peak_of(model_of(24, 0.1, 0.008, 0, 3e-5, 0)));
  auto bent = model_of(2.4, 0.1, 0.008, 0, 3e-5, 1e-6);
  bent.lack_of_fit = true;
  CHECK_FALSE(efficiency::peak_of(bent));
}

// Draws of this test: a gain error common to all levels and noise of each, fitted anew every time.
TEST_CASE("the peak's interval holds the truth as often as it says") {
  tests::RandomSource random{tests::seed_of_tests()};
  const double truth_w = std::sqrt(2.4 / 3e-5);
  const double truth = 1 / (1.008 + 2 * std::sqrt(2.4 * 3e-5));
  int fits = 0;
  int power_held = 0;
  int efficiency_held = 0;
  for (int k = 0; k < 300; ++k) {
    const double gain = 0.0005 * random.normal();
    std::vector<CurvePoint> points;
    for (const double load : {60.0, 120.0, 180.0, 300.0, 450.0, 600.0}) {
      const std::string label = std::to_string(std::lround(load));
      const double loss = 2.4 + load * (0.008 + load * 3e-5);
      const double shown = (load + loss) * (1 + gain) + 0.05 * random.normal();
      const Estimate input =
          Estimate{shown, estimate::make_type_b("gain", "gain", estimate::Distribution::normal),
                   0.0005 * shown} +
          Estimate{0, estimate::make_type_b(label, label, estimate::Distribution::normal), 0.05};
      points.push_back({label, input, Estimate{load}, input - load, load / input});
    }
    const auto model = efficiency::fit_loss_model(points, 0.001);
    REQUIRE(model);
    if (model->lack_of_fit) continue;
    const auto peak = efficiency::peak_of(*model, 5000);
    REQUIRE(peak);
    ++fits;
    power_held += peak->power_interval.low <= truth_w && truth_w <= peak->power_interval.high ? 1 : 0;
    efficiency_held +=
        peak->efficiency_interval.low <= truth && truth <= peak->efficiency_interval.high ? 1 : 0;
  }
  std::cout << "peak: power held in " << power_held << ", efficiency in " << efficiency_held << " of " << fits
            << " fits\n";
  // 95 % of 285 is 271 with a deviation of 3.7; three of them either way.
  CHECK(power_held > 0.911 * fits);
  CHECK(efficiency_held > 0.911 * fits);
}
