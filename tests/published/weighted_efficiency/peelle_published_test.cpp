// Peelle's puzzle: errors that the levels share must not pull a fit below its data.
#include <catch2/catch.hpp>
#include <cmath>
#include <fstream>
#include <nlohmann/json.hpp>
#include <string>
#include <vector>

#include "analysis/efficiency/efficiency.h"

using namespace loadstair;
using estimate::Estimate;

namespace {

struct Puzzle {
  std::vector<double> measured;
  double own = 0;     ///< relative
  double common = 0;  ///< the same
  double pulled = 0;
  double pulled_u = 0;
};

Puzzle puzzle() {
  std::ifstream file{std::string{LOADSTAIR_SOURCE} + "/tests/published/weighted_efficiency/peelle.json"};
  REQUIRE(file);
  const auto given = nlohmann::json::parse(file);
  return {given.at("measured").get<std::vector<double>>(),
          given.at("own_relative_standard_uncertainty").get<double>(),
          given.at("common_relative_standard_uncertainty").get<double>(),
          given.at("pulled_mean").get<double>(), given.at("pulled_standard_uncertainty").get<double>()};
}

}  // namespace

TEST_CASE("the puzzle's numbers are what its covariance matrix gives") {
  const Puzzle given = puzzle();
  const double a = given.measured[0];
  const double b = given.measured[1];
  const double own = given.own * given.own;
  const double common = given.common * given.common;
  const double v11 = (own + common) * a * a;
  const double v22 = (own + common) * b * b;
  const double v12 = common * a * b;
  const double sum = v11 + v22 - 2 * v12;  // of the inverse's elements, times the determinant
  CHECK(((v22 - v12) * a + (v11 - v12) * b) / sum == Approx(given.pulled).margin(0.005));
  CHECK(std::sqrt((v11 * v22 - v12 * v12) / sum) == Approx(given.pulled_u).margin(0.005));
}

TEST_CASE("a loss measured twice with a common error is not fitted below both values") {
  // The puzzle at each of three loads: two visits with losses of 1.5 and 1.0 W. Weighted by what is each
  // one's own, the mean is 1.1538; the common 20 % then count once, in full.
  const Puzzle given = puzzle();
  std::vector<efficiency::CurvePoint> points;
  for (const double power : {10.0, 20.0, 30.0}) {
    for (const double loss_w : given.measured) {
      const std::string label = "level " + std::to_string(points.size());
      const auto normal = estimate::Distribution::normal;
      efficiency::CurvePoint point;
      point.label = label;
      point.output_power = Estimate{power};
      point.loss =
          Estimate{loss_w, estimate::make_type_b("common", "common", normal), given.common * loss_w} +
          Estimate{0, estimate::make_type_b(label, label, normal), given.own * loss_w};
      point.input_power = point.output_power + point.loss;
      point.efficiency = point.output_power / point.input_power;
      points.push_back(point);
    }
  }
  const auto model = efficiency::fit_loss_model(points, 1e-6);
  REQUIRE(model);
  const double own_a = given.own * given.measured[0];
  const double own_b = given.own * given.measured[1];
  const double weight_a = 1 / (own_a * own_a);
  const double weight_b = 1 / (own_b * own_b);
  const double mean = (weight_a * given.measured[0] + weight_b * given.measured[1]) / (weight_a + weight_b);
  const double own_variance = 1 / (weight_a + weight_b);
  for (const double power : {10.0, 20.0, 30.0}) {
    const Estimate at = model->loss_at(power);
    CHECK(at.value() == Approx(mean).epsilon(1e-9));
    CHECK(at.value() > given.measured[1]);
    CHECK(at.standard_uncertainty() ==
          Approx(std::sqrt(own_variance + given.common * given.common * mean * mean)).epsilon(1e-6));
  }
  CHECK(mean == Approx(1.1538).margin(5e-5));
}
