#include "analysis/efficiency/loss_pieces.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <iostream>
#include <vector>

#include "analysis/base/number.h"
#include "analysis/efficiency/weighted.h"
#include "analysis/estimate/coverage.h"
#include "analysis/estimate/meter.h"
#include "tests/analysis/random_source.h"

using namespace loadstair;
using efficiency::Basis;
using efficiency::CurvePoint;
using efficiency::LossCurve;
using efficiency::LossPiece;
using estimate::Estimate;

namespace {

constexpr double kRated = 600;
const std::vector<double> kLoads{30, 60, 120, 180, 300, 450, 600};

double smooth_loss(double p) {
  return 2.4 + p * (0.008 + p * 3e-5);
}

/// A fan that takes 3 W from 200 W on.
double fan_loss(double p) {
  return smooth_loss(p) + (p > 200 ? 3 : 0);
}

/// Levels of a loss, each with noise of its own.
template <class Loss>
std::vector<CurvePoint> levels(const std::vector<double>& loads, Loss loss, double own_w = 0.005) {
  std::vector<CurvePoint> out;
  for (const double load : loads) {
    const std::string label = std::to_string(std::lround(load)) + " W";
    const Estimate of_loss{
        loss(load), estimate::make_type_b("noise at " + label, label, estimate::Distribution::normal), own_w};
    const Estimate input = load + of_loss;
    out.push_back({label, input, Estimate{load}, of_loss, load / input});
  }
  return out;
}

std::vector<CurvePoint> with_fan_named() {
  auto points = levels(kLoads, fan_loss);
  for (CurvePoint& point : points) point.segment = point.output_power.value() > 200 ? "fan on" : "fan off";
  return points;
}

bool inside(const Estimate& of, double truth) {
  const auto interval = estimate::coverage(of);
  return interval.low <= truth && truth <= interval.high;
}

}  // namespace

TEST_CASE("a fan splits the fit: each piece has its own coefficients") {
  const auto points = with_fan_named();
  // As one curve it is no parabola.
  REQUIRE(efficiency::fit_loss_model(points, 0.001)->lack_of_fit);
  const auto pieces = efficiency::fit_loss_models(points, 0.001);
  REQUIRE(pieces.size() == 2);
  CHECK(pieces[0].segment == "fan off");
  CHECK(pieces[0].levels == 4);
  CHECK(pieces[1].levels == 3);
  REQUIRE((pieces[0].usable() && pieces[1].usable()));
  CHECK(pieces[0].usable()->p0.value() == Approx(2.4).epsilon(1e-9));
  CHECK(pieces[1].usable()->p0.value() == Approx(5.4).epsilon(1e-9));
  CHECK(pieces[1].usable()->p2.value() == Approx(3e-5).epsilon(1e-9));

  const LossCurve curve{"7", points, pieces};
  CHECK(efficiency::loss_there(curve, 100)->loss.value() == Approx(fan_loss(100)).epsilon(1e-9));
  CHECK(efficiency::loss_there(curve, 400)->loss.value() == Approx(fan_loss(400)).epsilon(1e-9));
  // Where the fan starts nobody knows.
  const auto gap = efficiency::loss_there(curve, 240);
  REQUIRE_FALSE(gap);
  CHECK(gap.refusal().reason == "it lies between two pieces of the curve, \"fan off\" and \"fan on\"");
  CHECK_FALSE(efficiency::loss_there(curve, 700));
  CHECK_FALSE(efficiency::loss_there(curve, 10));
  CHECK_FALSE(efficiency::loss_there({"7", points, {}}, 100));
  // By input power: output plus loss is what was asked for.
  const auto by_input = efficiency::loss_there(curve, 400 + fan_loss(400), Basis::input_power);
  REQUIRE(by_input);
  CHECK(by_input->output_power_w == Approx(400).epsilon(1e-9));
}

TEST_CASE("weighted figures take each level from the piece that holds it") {
  const auto points = with_fan_named();
  const auto pieces = efficiency::fit_loss_models(points, 0.001);
  double exact = 0;
  for (const auto& level : efficiency::levels(efficiency::Scheme::cec)) {
    const double p = level.fraction * kRated;
    exact += level.weight * p / (p + fan_loss(p));
  }
  // 75 % left out: it comes from the piece with the fan. Every level 1 % of rated too high besides.
  const auto found =
      efficiency::weighted_efficiency(efficiency::Scheme::cec, kRated, LossCurve{"7", points, pieces});
  REQUIRE(found.efficiency);
  CHECK(found.efficiency->value() == Approx(exact).epsilon(1e-12));
  auto fewer = levels({66, 126, 186, 306, 320, 606}, fan_loss);
  for (CurvePoint& point : fewer) point.segment = point.output_power.value() > 200 ? "fan on" : "fan off";
  const auto other = efficiency::fit_loss_models(fewer, 0.001);
  const auto moved =
      efficiency::weighted_efficiency(efficiency::Scheme::cec, kRated, LossCurve{"7", fewer, other});
  REQUIRE(moved.efficiency);
  CHECK(moved.uses[4].from == "loss model");
  CHECK(moved.efficiency->value() == Approx(exact).epsilon(1e-5));
}

TEST_CASE("without a name for the fan the fit is refused, and neighbours bound what was not measured") {
  for (const double starts_w : {90.0, 150.0, 200.0, 250.0, 400.0, 500.0}) {
    const auto loss = [&](double p) { return smooth_loss(p) + (p > starts_w ? 3 : 0); };
    const auto points = levels(kLoads, loss);
    const auto pieces = efficiency::fit_loss_models(points, 0.001);
    REQUIRE(pieces.size() == 1);
    INFO("fan from " << starts_w << " W: " << pieces[0].model->lack_of_fit_text);
    REQUIRE(pieces[0].usable() == nullptr);
    const LossCurve curve{"7", points, pieces};
    for (double p = 31; p < 600; p += 3.7) {
      const auto there = efficiency::loss_there(curve, p);
      REQUIRE(there);
      CHECK_FALSE(there->by_model);
      INFO(p << " W: " << there->loss.value() << " for " << loss(p));
      CHECK(inside(there->loss, loss(p)));
    }
    const auto cec = efficiency::weighted_efficiency(efficiency::Scheme::cec, kRated, curve);
    REQUIRE(cec.efficiency);
    const auto european =
        efficiency::weighted_efficiency(efficiency::Scheme::european, kRated + loss(kRated), curve);
    REQUIRE(european.efficiency);
    double exact = 0;
    for (const auto& level : efficiency::levels(efficiency::Scheme::european)) {
      const double input = level.fraction * (kRated + loss(kRated));
      double p = input;
      for (int i = 0; i < 60; ++i) p = input - loss(p);
      exact += level.weight * p / input;
    }
    CHECK(inside(*european.efficiency, exact));
  }
}

// A smooth curve that is no parabola (a square-root term, as of a rectifier at light load): half-widths hold.
TEST_CASE("local interpolation on smooth curves that no parabola fits") {
  tests::RandomSource random{tests::seed_of_tests()};
  int held = 0;
  int asked = 0;
  double widest = 0;
  for (int k = 0; k < 100; ++k) {
    const double root = random.uniform(0.05, 0.3);
    const double cubic = random.uniform(0, 3e-8);
    const auto loss = [&](double p) {
      return 1 + root * std::sqrt(p) + 0.004 * p + 2e-5 * p * p + cubic * p * p * p;
    };
    const auto points = levels(kLoads, loss, 1e-4);
    // As after a significant lack of fit.
    auto pieces = efficiency::fit_loss_models(points, 0.001);
    pieces[0].model->lack_of_fit = true;
    const LossCurve curve{"7", points, pieces};
    for (int j = 0; j < 20; ++j) {
      const double p = random.uniform(30, 600);
      const auto there = efficiency::loss_there(curve, p);
      REQUIRE(there);
      ++asked;
      held += inside(there->loss, loss(p)) ? 1 : 0;
      widest = std::max(widest, estimate::coverage(there->loss).expanded / loss(p));
    }
  }
  std::cout << "local interpolation: " << held << " of " << asked << " hold, widest "
            << base::print_significant(100 * widest, 3) << " % of the loss\n";
  CHECK(held >= 0.99 * asked);
  // A bound, not a refusal in disguise.
  CHECK(widest < 0.25);
}

TEST_CASE("a parabola is interpolated exactly, two levels alone within what it may bend") {
  const auto points = levels(kLoads, smooth_loss, 1e-9);
  auto pieces = efficiency::fit_loss_models(points, 1e-9);
  pieces[0].model->lack_of_fit = true;
  const LossCurve curve{"7", points, pieces};
  for (const double p : {61.0, 100.0, 240.0, 449.0}) {
    INFO(p);
    CHECK(efficiency::loss_there(curve, p)->loss.value() == Approx(smooth_loss(p)).epsilon(1e-12));
  }
  // At the ends a parabola cannot be told from a line with a step.
  for (const double p : {31.0, 50.0, 460.0, 599.0})
    CHECK(inside(efficiency::loss_there(curve, p)->loss, smooth_loss(p)));
  const auto two = levels({300, 600}, smooth_loss, 1e-9);
  const auto none = efficiency::fit_loss_models(two, 1e-9);
  REQUIRE(none.size() == 1);
  CHECK_FALSE(none[0].model);
  CHECK(none[0].why.find("needs at least three levels, got 2") != std::string::npos);
  for (const double p : {310.0, 450.0, 590.0}) {
    // Any parabola through both without negative terms: no bend at all, or all of it.
    const auto there = efficiency::loss_there({"7", two, none}, p);
    REQUIRE(there);
    const double line = smooth_loss(300) + (smooth_loss(600) - smooth_loss(300)) / 300 * (p - 300);
    const double bend = (smooth_loss(600) - smooth_loss(300)) / (600.0 * 600 - 300 * 300);
    const double parabola = smooth_loss(300) + bend * (p * p - 300 * 300);
    CHECK(inside(there->loss, line));
    CHECK(inside(there->loss, parabola));
    CHECK(inside(there->loss, smooth_loss(p)));
  }
}

TEST_CASE("the slope at a level alone on its piece holds every loss without negative terms") {
  auto points = levels(kLoads, smooth_loss);
  points[0].segment = "A1 on 1 A";
  const auto pieces = efficiency::fit_loss_models(points, 0.001);
  REQUIRE(pieces.size() == 2);
  const LossCurve curve{"7", points, pieces};
  const auto slope = efficiency::slope_near(curve, 0);
  CHECK(inside(slope, 0));
  CHECK(inside(slope, 0.008 + 2 * 3e-5 * 30));
  CHECK(inside(slope, 2 * smooth_loss(30) / 30));
  CHECK(efficiency::slope_near(curve, 3).value() == Approx(0.008 + 2 * 3e-5 * 180).epsilon(1e-9));
}

TEST_CASE("a meter's range makes a piece of its own, and a whole curve has no name") {
  estimate::MeterRange low{{"A1", "dc current", "1 A"}, 1, 0, estimate::AccuracySpec{0.1, 0, 0}};
  estimate::MeterRange high{{"A1", "dc current", "10 A"}, 10, 0, estimate::AccuracySpec{0.1, 0, 0}};
  estimate::MeterRange volts{{"V1", "dc voltage", "600 V"}, 600, 0, estimate::AccuracySpec{0.1, 0, 0}};
  const auto level = [&](double load, const estimate::MeterRange& meter) {
    const std::string label = std::to_string(std::lround(load));
    const estimate::Occasion at{"7", label};
    const Estimate input = *estimate::with_meter_error(400, volts, at) *
                           *estimate::with_meter_error((load + smooth_loss(load)) / 400, meter, at);
    return CurvePoint{label, input, Estimate{load}, input - load, load / input};
  };
  std::vector<CurvePoint> points{level(60, low), level(120, low), level(300, low), level(450, high),
                                 level(600, high)};
  efficiency::split_by_range(points);
  CHECK(points[0].segment == "A1 on 1 A");
  CHECK(points[2].segment == "A1 on 1 A");
  CHECK(points[3].segment == "A1 on 10 A");
  const auto pieces = efficiency::fit_loss_models(points, 0.001);
  REQUIRE(pieces.size() == 2);
  CHECK(pieces[0].usable());
  CHECK_FALSE(pieces[1].usable());
  // What it was called before stays in front.
  points[4].segment = "fan on";
  efficiency::split_by_range(points);
  CHECK(points[4].segment == "fan on, A1 on 10 A");
  std::vector<CurvePoint> one{level(60, low), level(120, low)};
  efficiency::split_by_range(one);
  CHECK(one[0].segment.empty());
}
