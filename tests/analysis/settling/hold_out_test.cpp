#include "analysis/settling/hold_out.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <vector>

#include "tests/analysis/random_source.h"

namespace loadstair::settling {
namespace {

using Catch::Matchers::Contains;

struct Readings {
  std::vector<double> time_s, value;
  [[nodiscard]] Trace trace() const { return {time_s, value}; }
};

template <class F>
Readings readings_of(F curve, double duration_s, double noise, std::uint64_t seed) {
  tests::RandomSource random{seed};
  Readings out;
  for (double t = 0.0; t <= duration_s; t += 5.0) {
    out.time_s.push_back(t);
    out.value.push_back(curve(t) + noise * random.normal());
  }
  return out;
}

ThermalCriterion criterion_of(double slowest_tau_s) {
  ThermalCriterion criterion;
  criterion.rate = {0.5, 900.0, 1, 0.0, false};
  // Not allowed to end the step: what it would have said is asked all the same.
  criterion.prediction = PredictionCriterion{1.0, slowest_tau_s, false};
  return criterion;
}

TEST_CASE("a prediction that would have ended the step is held against its end") {
  const auto curve = [](double t) { return 65.0 - 40.0 * std::exp(-t / 400.0); };
  const auto run = readings_of(curve, 4000.0, 0.05, 3);
  const auto found = hold_out(run.trace(), {}, criterion_of(800.0));
  REQUIRE(found);
  REQUIRE(found->has_value());
  const HoldOut& out = **found;
  INFO(out.text);
  // No sooner than condition 1 allows, twice the constant; by then 87 % of the rise is seen.
  CHECK(out.after_s >= 800.0);
  CHECK(out.after_s < 2500.0);
  CHECK(out.after_s + out.earlier_s == Approx(4000.0));
  CHECK(out.held);
  // The curve's own end, 65, is missed by no more than the predicted interval.
  CHECK(out.predicted.low <= 65.0);
  CHECK(65.0 <= out.predicted.high);
  CHECK(out.measured.value == Approx(65.0).margin(0.1));
  CHECK(out.error == Approx(out.predicted.value - out.measured.value));
  CHECK_THAT(out.text, Contains("would have been accepted") && Contains("within its interval"));
}

TEST_CASE("a promise of no slow constant that is broken shows as a prediction that did not hold") {
  // The file declares 200 s for the slowest constant; 2 K that come with 20 000 s break the promise.
  const auto curve = [](double t) {
    return 25.0 + 28.0 * (1.0 - std::exp(-t / 150.0)) + 2.0 * (1.0 - std::exp(-t / 20000.0));
  };
  const auto run = readings_of(curve, 40000.0, 0.3, 4);
  auto criterion = criterion_of(200.0);
  const auto found = hold_out(run.trace(), {}, criterion, {400});
  REQUIRE(found);
  REQUIRE(found->has_value());
  INFO((*found)->text);
  CHECK_FALSE((*found)->held);
  CHECK((*found)->error < -0.5);
  CHECK_THAT((*found)->text, Contains("outside its interval"));
}

TEST_CASE("a prediction is compared at the ambient of the step's end") {
  // The room warms by 6 K after the prediction; the object follows it.
  const auto room = [](double t) { return 20.0 + 6.0 * t / 4000.0; };
  const auto run =
      readings_of([&](double t) { return room(t) + 40.0 * (1.0 - std::exp(-t / 400.0)); }, 4000.0, 0.05, 5);
  std::vector<double> ambient;
  for (const double t : run.time_s) ambient.push_back(room(t));
  const auto found = hold_out(run.trace(), ambient, criterion_of(800.0));
  REQUIRE(found);
  REQUIRE(found->has_value());
  INFO((*found)->text);
  CHECK((*found)->held);
  CHECK((*found)->predicted.value == Approx(66.0).margin(0.5));
  CHECK((*found)->measured.value == Approx(66.0).margin(0.1));
}

TEST_CASE("a fan that starts after the prediction is said to be the reason") {
  const auto before = [](double t) { return 65.0 - 40.0 * std::exp(-t / 300.0); };
  const double turn = before(2400.0);
  const auto run = readings_of(
      [&](double t) {
        return t < 2400.0 ? before(t) : 50.0 + (turn - 50.0) * std::exp(-(t - 2400.0) / 200.0);
      },
      5000.0, 0.05, 6);
  const auto found = hold_out(run.trace(), {}, criterion_of(600.0));
  REQUIRE(found);
  REQUIRE(found->has_value());
  INFO((*found)->text);
  CHECK((*found)->after_s < 2400.0);
  CHECK_FALSE((*found)->held);
  CHECK((*found)->error == Approx(15.0).margin(0.5));
  CHECK_THAT((*found)->text, Contains("something changed in between"));
}

TEST_CASE("no acceptable prediction is no hold-out, and broken input is refused") {
  const auto straight = readings_of([](double t) { return 25.0 + 0.01 * t; }, 2000.0, 0.05, 7);
  const auto none = hold_out(straight.trace(), {}, criterion_of(800.0));
  REQUIRE(none);
  CHECK_FALSE(none->has_value());

  const auto run = readings_of([](double t) { return 65.0 - 40.0 * std::exp(-t / 400.0); }, 4000.0, 0.05, 8);
  ThermalCriterion by_rate_alone;
  const auto without = hold_out(run.trace(), {}, by_rate_alone);
  REQUIRE(without);
  CHECK_FALSE(without->has_value());
  CHECK_FALSE(hold_out(run.trace(), std::span{run.value}.first(3), criterion_of(800.0)));
  CHECK_FALSE(hold_out(run.trace(), {}, criterion_of(800.0), {1}));
  CHECK_FALSE(
      hold_out({std::span{run.time_s}.first(10), std::span{run.value}.first(10)}, {}, criterion_of(800.0)));
  const std::vector<double> back = {0.0, 2.0, 1.0};
  CHECK_FALSE(hold_out({back, back}, {}, criterion_of(800.0)));
}

}  // namespace
}  // namespace loadstair::settling
