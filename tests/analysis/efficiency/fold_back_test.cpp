#include "analysis/efficiency/fold_back.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <limits>
#include <numbers>
#include <string>
#include <vector>

#include "analysis/estimate/coverage.h"
#include "analysis/estimate/meter.h"
#include "analysis/random_source.h"

namespace efficiency = loadstair::efficiency;
namespace estimate = loadstair::estimate;
using loadstair::tests::RandomSource;

namespace {

constexpr double kSourceV = 12;
constexpr double kSourceOhm = 0.05;

/// V = 12 V - 0.05 ohm I up to the trip; beyond it I = trip (1 - k + k (V + 0.05 ohm I) / 12 V): constant
/// current for k = 0. Into a resistance: closed form, linear on both sides.
struct Characteristic {
  double trip_a = 5, fold = 0;

  /// Current into a resistance, A.
  [[nodiscard]] double current(double ohm) const {
    const double plain = kSourceV / (ohm + kSourceOhm);
    if (plain <= trip_a) return plain;
    return trip_a * (1 - fold) / (1 - trip_a * fold * (ohm + kSourceOhm) / kSourceV);
  }
};

/// Loads that would take `share` of the trip current if there were no limit.
std::vector<efficiency::OutputPoint> measured(const Characteristic& characteristic,
                                              const std::vector<double>& shares, double noise,
                                              RandomSource& random) {
  std::vector<efficiency::OutputPoint> out;
  for (std::size_t i = 0; i < shares.size(); ++i) {
    const double ohm = kSourceV / (shares[i] * characteristic.trip_a) - kSourceOhm;
    const double current = characteristic.current(ohm);
    const auto with_noise = [&](double value, const std::string& what) {
      const auto source =
          estimate::make_type_a(estimate::key::window("run", std::to_string(i), what), what, 49);
      return estimate::Estimate{value * (1 + noise * random.normal()), source, noise * value};
    };
    out.push_back({std::to_string(i), with_noise(current, "A"), with_noise(current * ohm, "V")});
  }
  return out;
}

const std::vector<double> kStairs = {0.5, 0.6, 0.7, 0.8, 0.9, 1.1, 1.2, 1.3};

}  // namespace

TEST_CASE("the knee of a piecewise linear characteristic, exact points") {
  RandomSource random{1};
  for (const double fold : {0.0, 0.3, 0.6}) {
    const Characteristic characteristic{5, fold};
    const auto found = efficiency::fold_back(measured(characteristic, kStairs, 0, random));
    REQUIRE(found);
    CAPTURE(fold, found->text);
    REQUIRE(found->state == efficiency::FoldState::found);
    CHECK(found->knee_current->value() == Approx(5).epsilon(1e-9));
    CHECK(found->knee_voltage->value() == Approx(11.75).epsilon(1e-9));
    CHECK(found->line_ohm == Approx(0.05).epsilon(1e-6));
    CHECK(found->on_line == 5);
    CHECK(found->on_branch == 3);
  }
}

TEST_CASE("the knee is found to 1 % at several noise levels, and its interval holds it") {
  // 95 % intervals: of 400 trials 380 hold on average, 367 or fewer with a probability of 0.4 % (binomial).
  RandomSource random{loadstair::tests::seed_of_tests()};
  for (const double noise : {0.0001, 0.0005, 0.001, 0.002}) {
    for (const double fold : {0.0, 0.5}) {
      int held = 0;
      double worst = 0;
      for (int trial = 0; trial < 400; ++trial) {
        const double trip = random.uniform(3, 8);
        const auto found = efficiency::fold_back(measured({trip, fold}, kStairs, noise, random));
        REQUIRE(found);
        CAPTURE(noise, fold, trip, found->text);
        REQUIRE(found->state == efficiency::FoldState::found);
        const auto interval = estimate::coverage(*found->knee_current);
        worst = std::max(worst, std::abs(interval.value / trip - 1));
        if (interval.low <= trip && trip <= interval.high) ++held;
      }
      CAPTURE(noise, fold, held, worst);
      // With 0.2 % on each single point one deviation of the knee is 0.35 %: three of them pass 1 %.
      CHECK(worst < (noise < 0.0015 ? 0.01 : 0.02));
      CHECK(held > 366);
      CHECK(held < 400);
    }
  }
}

TEST_CASE("a gain that all currents share moves the knee as a whole") {
  const estimate::MeterRange meter{{"A1", "dc current", "10 A"}, 10, 0, estimate::AccuracySpec{0.5, 0, 0}};
  RandomSource random{1};
  auto points = measured({5, 0.2}, kStairs, 0, random);
  for (auto& point : points) {
    point.current =
        estimate::with_meter_error(point.current.value(), meter, {"run", point.label}, {1, 0, 0}).value();
  }
  const auto found = efficiency::fold_back(points);
  REQUIRE(found);
  REQUIRE(found->knee_current);
  // Closed form: 0.5 % of 5 A, rectangular.
  CHECK(found->knee_current->standard_uncertainty() == Approx(0.025 / std::sqrt(3.0)).epsilon(1e-3));
}

TEST_CASE("a slow sweep of single readings: scatter becomes Type A") {
  RandomSource random{loadstair::tests::seed_of_tests()};
  std::vector<double> shares;
  for (int i = 0; i < 200; ++i) shares.push_back(0.3 + 0.006 * i);
  int held = 0;
  for (int trial = 0; trial < 60; ++trial) {
    auto points = measured({5, 0.3}, shares, 0.003, random);
    for (auto& point : points) {
      point.current = estimate::Estimate{point.current.value()};
      point.voltage = estimate::Estimate{point.voltage.value()};
    }
    const auto found = efficiency::fold_back(points);
    REQUIRE(found);
    REQUIRE(found->knee_current);
    CHECK(found->knee_current->value() == Approx(5).epsilon(0.01));
    const auto interval = estimate::coverage(*found->knee_current);
    if (interval.low <= 5 && 5 <= interval.high) ++held;
  }
  CHECK(held >= 50);  // of 60 at 95 %: 51 or fewer with a probability of 0.2 % (binomial)
}

TEST_CASE("no fold-back within the span, and too few points beyond it, are states of their own") {
  RandomSource random{3};
  const auto none = efficiency::fold_back(measured({5, 0}, {0.3, 0.5, 0.7, 0.9, 0.99}, 0.001, random));
  REQUIRE(none);
  CHECK(none->state == efficiency::FoldState::none_within_span);
  CHECK_FALSE(none->knee_current);
  CHECK(none->text.substr(0, 36) == "no fold-back within the span (up to ");
  for (const auto& shares : {std::vector<double>{0.5, 0.7, 0.9, 1.2}, std::vector<double>{0.5, 0.9, 1.3}}) {
    const auto one = efficiency::fold_back(measured({5, 0}, shares, 0.0005, random));
    REQUIRE(one);
    CAPTURE(one->text);
    CHECK(one->state == efficiency::FoldState::too_few_points);
    CHECK_FALSE(one->knee_current);
  }
  // An output that merely droops, ever faster, has no knee.
  std::vector<efficiency::OutputPoint> droop;
  for (int i = 1; i <= 10; ++i) {
    droop.push_back({std::to_string(i), estimate::Estimate{0.5 * i}, estimate::Estimate{12 - 0.01 * i * i}});
  }
  const auto drooping = efficiency::fold_back(droop);
  REQUIRE(drooping);
  CHECK(drooping->state == efficiency::FoldState::none_within_span);
}

TEST_CASE("a knee is found whatever the order of the points, down to a short circuit") {
  RandomSource random{1};
  auto points = measured({5, 0.4}, kStairs, 0, random);
  points.insert(points.begin(),
                {"short", estimate::Estimate{Characteristic{5, 0.4}.current(0)}, estimate::Estimate{0}});
  std::swap(points[2], points[7]);
  const auto found = efficiency::fold_back(points);
  REQUIRE(found);
  REQUIRE(found->knee_current);
  CHECK(found->knee_current->value() == Approx(5).epsilon(1e-9));
}

TEST_CASE("knee against expected trip, whatever is sensed") {
  // 0.5 V over 0.1 ohm: 5 A; as a sine's peak 5 / sqrt 2 A RMS, as its rectified mean 5 pi / (2 sqrt 2) A
  // RMS.
  const auto tolerance = [](double value, double share, const std::string& name) {
    return estimate::bounded(value * (1 - share), value * (1 + share),
                             estimate::make_type_b(estimate::key::component(name, "tolerance"), name,
                                                   estimate::Distribution::rectangular));
  };
  const auto threshold = tolerance(0.5, 0.02, "threshold");
  const auto resistor = tolerance(0.1, 0.01, "sense resistor");
  RandomSource random{5};
  const double root2 = std::numbers::sqrt2;
  const std::vector<std::pair<efficiency::Sense, double>> kinds = {
      {efficiency::Sense::peak, 5 / root2},
      {efficiency::Sense::rms, 5},
      {efficiency::Sense::average, 5 * std::numbers::pi / (2 * root2)}};
  for (const auto& [sense, rms_a] : kinds) {
    const auto found = efficiency::fold_back(measured({rms_a, 0.2}, kStairs, 0.0005, random));
    REQUIRE(found);
    REQUIRE(found->knee_current);
    const auto expected = efficiency::trip_current(threshold, resistor, sense);
    REQUIRE(expected);
    CHECK(expected->value() == Approx(rms_a).epsilon(1e-12));
    const auto agreement = efficiency::trip_agreement(*found->knee_current, *expected);
    REQUIRE(agreement);
    CAPTURE(agreement->text);
    CHECK(agreement->agrees);
    CHECK(agreement->allowed > 1.9 * rms_a * std::hypot(0.02, 0.01) / std::sqrt(3.0));
    const auto wrong = efficiency::trip_agreement(*found->knee_current, *expected * 1.1);
    REQUIRE(wrong);
    CHECK_FALSE(wrong->agrees);
  }
}

TEST_CASE("fold-back: hostile points are refused, and nothing is NaN") {
  const double nan = std::numeric_limits<double>::quiet_NaN();
  RandomSource random{1};
  CHECK_FALSE(efficiency::fold_back({}));
  CHECK_FALSE(efficiency::fold_back(measured({5, 0}, {0.5}, 0, random)));
  for (const double bad : {nan, HUGE_VAL, -1.0}) {
    auto points = measured({5, 0}, kStairs, 0, random);
    points[3].current = estimate::Estimate{bad};
    CHECK_FALSE(efficiency::fold_back(points));
    CHECK_FALSE(efficiency::trip_agreement(estimate::Estimate{bad}, estimate::Estimate{1}));
  }
  RandomSource wild{loadstair::tests::seed_of_tests()};
  for (int trial = 0; trial < 2000; ++trial) {
    std::vector<efficiency::OutputPoint> points;
    const std::size_t many = 2 + wild.below(8);
    const auto number = [&] {
      const double kind = wild.uniform();
      if (kind < 0.2) return 0.0;
      if (kind < 0.3) return 1.0;
      return std::pow(10, wild.uniform(-150, 150) * (kind < 0.5 ? 1 : 0.01));
    };
    for (std::size_t i = 0; i < many; ++i) {
      points.push_back({"p", estimate::Estimate{number()}, estimate::Estimate{number()}});
    }
    const auto found = efficiency::fold_back(points);
    if (!found || !found->knee_current) continue;
    CHECK(std::isfinite(found->knee_current->value()));
    CHECK(std::isfinite(found->knee_current->variance()));
    CHECK(std::isfinite(found->knee_voltage->variance()));
  }
}
