#include "analysis/efficiency/loss_model.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <vector>

#include "analysis/efficiency/weighted.h"
#include "analysis/estimate/coverage.h"
#include "tests/analysis/random_source.h"

using namespace loadstair;
using efficiency::CurvePoint;
using estimate::Estimate;

namespace {

constexpr double kP0 = 2.4;
constexpr double kP1 = 0.008;
constexpr double kP2 = 3e-5;

double loss_of(double power) {
  return kP0 + power * (kP1 + power * kP2);
}

Estimate with(double value, const std::string& key, double u) {
  return Estimate{value, estimate::make_type_b(key, key, estimate::Distribution::normal), u};
}

CurvePoint point_of(const Estimate& input, const Estimate& output, std::string label) {
  return {std::move(label), input, output, input - output, output / input};
}

/// Levels with a gain error common to all inputs and noise of their own.
std::vector<CurvePoint> levels(const std::vector<double>& powers, double common, double own,
                               const std::vector<double>& errors = {}) {
  std::vector<CurvePoint> out;
  for (std::size_t i = 0; i < powers.size(); ++i) {
    const double input = powers[i] + loss_of(powers[i]) + (errors.empty() ? 0 : errors[i]);
    const std::string label = "level " + std::to_string(i);
    out.push_back(point_of(with(input, "gain", common * input) + with(0, "noise of " + label, own),
                           Estimate{powers[i]}, label));
  }
  return out;
}

}  // namespace

TEST_CASE("a gain error common to all levels does not steer the fit, and passes through it") {
  const std::vector<double> powers{30, 60, 120, 180, 300, 450, 600};
  const auto points = levels(powers, 0.002, 0.05);
  const auto model = efficiency::fit_loss_model(points, 0.001);
  REQUIRE(model);
  CHECK(model->p0.value() == Approx(kP0).epsilon(1e-9));
  CHECK(model->p2.value() == Approx(kP2).epsilon(1e-9));
  // The loss at a level moves with the gain by 0.2 % of the input power there: the linear estimator
  // reproduces a quadratic exactly, and so does the chain rule with its sensitivities.
  const Estimate at = model->loss_at(300);
  const auto gain = at.filtered([](const estimate::Source& s) { return s.key == "gain"; });
  CHECK(gain.standard_uncertainty() == Approx(0.002 * (300 + loss_of(300))).epsilon(1e-9));
  CHECK(model->efficiency_at(300).value() == Approx(300 / (300 + loss_of(300))).epsilon(1e-12));
}

TEST_CASE("levels of equal scatter are fitted as ordinary least squares do, with their textbook variance") {
  // Three levels determine three coefficients: the fitted losses are the measured ones, with their own
  // deviations.
  const auto points = levels({100, 300, 600}, 0, 0.05, {0.02, -0.01, 0.03});
  const auto model = efficiency::fit_loss_model(points, 1e-6);
  REQUIRE(model);
  for (std::size_t i = 0; i < 3; ++i) {
    const Estimate at = model->loss_at(points[i].output_power.value());
    CHECK(at.value() == Approx(points[i].loss.value()).epsilon(1e-9));
    CHECK(at.standard_uncertainty() == Approx(0.05).epsilon(1e-6));
  }
  CHECK(model->lack_of_fit_text == "not tested (3 levels)");
  CHECK_FALSE(model->lack_of_fit_tested);
}

TEST_CASE("the derivative with respect to a level's power is that of the fit itself") {
  const std::vector<double> errors{0.1, -0.2, 0.15, -0.1, 0.05};
  const std::vector<double> powers{60, 150, 300, 450, 600};
  const double step = 1e-4;
  for (std::size_t moved = 0; moved < powers.size(); ++moved) {
    auto points = levels(powers, 0, 0.1, errors);
    points[moved].output_power = with(powers[moved], "power", 1);
    const auto model = efficiency::fit_loss_model(points, 0.001);
    REQUIRE(model);
    auto shifted = levels(powers, 0, 0.1, errors);
    shifted[moved].output_power = Estimate{powers[moved] + step};
    const auto other = efficiency::fit_loss_model(shifted, 0.001);
    REQUIRE(other);
    const auto by_chain =
        model->loss_at(200).filtered([](const estimate::Source& s) { return s.key == "power"; });
    REQUIRE(by_chain.terms().size() == 1);
    CHECK(by_chain.terms()[0].contribution ==
          Approx((other->loss_at(200).value() - model->loss_at(200).value()) / step)
              .epsilon(1e-4)
              .margin(1e-8));
  }
}

TEST_CASE("lack of fit is found where there is one, and not where there is only noise") {
  const auto seed = tests::seed_of_tests();
  INFO("LOADSTAIR_SEED=" << seed);
  tests::RandomSource random{seed};
  const std::vector<double> powers{30, 60, 120, 180, 300, 450, 600};
  int alarms = 0;
  for (int k = 0; k < 400; ++k) {
    std::vector<double> errors;
    for (std::size_t i = 0; i < powers.size(); ++i) errors.push_back(0.05 * random.normal());
    const auto model = efficiency::fit_loss_model(levels(powers, 0, 0.05, errors), 1e-6);
    REQUIRE(model);
    if (model->lack_of_fit) ++alarms;
  }
  // 5 % of 400 are 20, with a deviation of 4.4; four of them either way.
  CHECK(alarms >= 3);
  CHECK(alarms <= 38);
  // A fan that starts at 300 W adds 2 W: no quadratic.
  const auto fan = efficiency::fit_loss_model(levels(powers, 0, 0.05, {0, 0, 0, 0, 2, 2, 2}), 0.001);
  REQUIRE(fan);
  CHECK(fan->lack_of_fit);
  CHECK(fan->lack_of_fit_text.find("significant: chi-squared") == 0);
  CHECK_FALSE(fan->peak_power());
}

TEST_CASE("a fit that cannot be had is refused") {
  CHECK_FALSE(efficiency::fit_loss_model(levels({100, 300}, 0, 0.1), 0.001));
  CHECK_FALSE(efficiency::fit_loss_model(levels({300, 300, 300, 300}, 0, 0.1), 0.001));
  CHECK_FALSE(efficiency::fit_loss_model(levels({100, 300, 600}, 0, 0.1), 0));
  CHECK_FALSE(efficiency::fit_loss_model({}, 0.001));
  const auto model = efficiency::fit_loss_model(levels({400, 500, 600}, 0, 0.1), 0.001);
  REQUIRE(model);
  // sqrt(2.4/3e-5) = 283 W lies outside 400 to 600 W.
  CHECK(model->peak_power().refusal().reason.find("283 W, outside the measured 400 to 600 W") !=
        std::string::npos);
}

TEST_CASE("a level within 2 % of rated is moved to the nominal one along the loss slope") {
  const double rated = 600;
  for (const auto scheme : {efficiency::Scheme::cec, efficiency::Scheme::european}) {
    // Every level is 1 % of rated too high.
    std::vector<double> powers;
    for (const auto& level : efficiency::levels(scheme)) powers.push_back((level.fraction + 0.01) * rated);
    if (scheme == efficiency::Scheme::european) {
      for (double& power : powers) {
        // The output at which the input is that: Newton by hand.
        const double input = power;
        for (int i = 0; i < 30; ++i) power -= (power + loss_of(power) - input) / (1 + kP1 + 2 * kP2 * power);
      }
    }
    const auto points = levels(powers, 0, 0.001);
    const auto model = efficiency::fit_loss_model(points, 0.001);
    REQUIRE(model);
    const auto found = efficiency::weighted_efficiency(scheme, rated, points, &*model);
    REQUIRE(found.efficiency);
    double exact = 0;
    for (const auto& level : efficiency::levels(scheme)) {
      double output = level.fraction * rated;
      if (scheme == efficiency::Scheme::european) {
        const double input = output;
        for (int i = 0; i < 30; ++i)
          output -= (output + loss_of(output) - input) / (1 + kP1 + 2 * kP2 * output);
        exact += level.weight * output / input;
      } else {
        exact += level.weight * output / (output + loss_of(output));
      }
    }
    // Left over is the curvature: p2 (6 W)^2 = 1.1 mW of loss, at most 36 ppm of the smallest level's power.
    CHECK(found.efficiency->value() == Approx(exact).epsilon(1e-5));
    for (const auto& use : found.uses) CHECK(use.moved);
    // The smallest level shifts most, downwards.
    CHECK(found.uses[0].shift.value() < -0.002);
    CHECK(found.uses[0].shift.standard_uncertainty() > 0);
    // Without a model the slope between neighbours serves, less exactly.
    const auto local = efficiency::weighted_efficiency(scheme, rated, points, nullptr);
    REQUIRE(local.efficiency);
    CHECK(local.efficiency->value() == Approx(exact).epsilon(1e-3));
  }
}

TEST_CASE("a level too far away and outside the span refuses the weighted figure, by level and reason") {
  const auto points = levels({60, 120, 180, 300, 450}, 0, 0.01);
  const auto model = efficiency::fit_loss_model(points, 0.001);
  REQUIRE(model);
  const auto found = efficiency::weighted_efficiency(efficiency::Scheme::cec, 600, points, &*model, "385 V");
  CHECK(found.title == "CEC-weighted at 385 V");
  REQUIRE_FALSE(found.efficiency);
  CHECK(found.efficiency.refusal().reason ==
        "level 100 %: no measured level within 2 % of rated, and it lies outside the measured span");
  CHECK(found.uses.size() == 5);
  CHECK_FALSE(efficiency::weighted_efficiency(efficiency::Scheme::cec, 0, points, &*model).efficiency);
  CHECK_FALSE(efficiency::weighted_efficiency(efficiency::Scheme::cec, 600, {}, nullptr).efficiency);
}
