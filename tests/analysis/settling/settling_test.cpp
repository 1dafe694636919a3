#include "analysis/settling/settling.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <random>
#include <string>
#include <vector>

namespace loadstair::settling {
namespace {

using Catch::Matchers::Contains;

/// Readings of a curve with normal noise (Box and Muller 1958) of a given deviation.
struct Readings {
  std::vector<double> time_s, value;

  template <class F>
  static Readings of(F curve, double duration_s, double interval_s, double noise, std::uint64_t seed) {
    std::mt19937_64 random{seed};
    const auto draw = [&] { return (static_cast<double>(random() >> 11) + 0.5) * 0x1p-53; };
    Readings out;
    for (double t = 0.0; t <= duration_s; t += interval_s) {
      const double normal = std::sqrt(-2.0 * std::log(draw())) * std::cos(6.283185307179586 * draw());
      out.time_s.push_back(t);
      out.value.push_back(curve(t) + noise * normal);
    }
    return out;
  }
  [[nodiscard]] Trace trace() const { return {time_s, value}; }
};

TEST_CASE("a slope within its limit settles, one beyond does not, and noise is not steadiness") {
  SlopeCriterion criterion;
  criterion.window_s = 20.0;
  criterion.limit_per_s = 0.05;
  const auto verdict_of = [&](double slope, double noise, double duration_s) {
    const auto readings =
        Readings::of([&](double t) { return 600.0 + slope * t; }, duration_s, 0.5, noise, 4711);
    const auto verdict = settled_by_slope(readings.trace(), criterion);
    REQUIRE(verdict);
    return *verdict;
  };
  const Verdict steady = verdict_of(0.01, 0.02, 60.0);
  CHECK(steady.settled);
  CHECK(steady.by == SettledBy::electrical_slope);
  CHECK(steady.wait_s == 0.0);
  REQUIRE(steady.end);
  CHECK(steady.end->value == Approx(600.6).margin(0.1));

  const Verdict drifting = verdict_of(0.2, 0.02, 60.0);
  CHECK_FALSE(drifting.settled);
  CHECK_THAT(drifting.why, Contains("still moving"));

  const Verdict noisy = verdict_of(0.0, 5.0, 60.0);
  CHECK_FALSE(noisy.settled);
  CHECK_THAT(noisy.why, Contains("noise hides the slope"));

  const Verdict early = verdict_of(0.0, 0.02, 5.0);
  CHECK_FALSE(early.settled);
  CHECK(*early.wait_s == Approx(15.0));
  CHECK_THAT(early.why, Contains("window of 20 s"));

  // The window alone counts: what moved before it does not.
  const auto ramp = Readings::of([](double t) { return t < 40.0 ? 10.0 * t : 400.0; }, 80.0, 0.5, 0.02, 1);
  CHECK(settled_by_slope(ramp.trace(), criterion)->settled);
}

TEST_CASE("a rate criterion counts windows, holds, and sees only a rise when told so") {
  const auto rise =
      Readings::of([](double t) { return 60.0 - 40.0 * std::exp(-t / 300.0); }, 3000.0, 2.0, 0.05, 7);
  RateCriterion once{0.5, 300.0, 1, 0.0, false};
  CHECK(settled_by_rate(rise.trace(), once)->settled);
  // Change over the last 300 s falls below 0.5 K at 300 ln(40 (e - 1)/0.5) = 1477 s (closed form).
  const Trace at_1400{std::span{rise.time_s}.first(700), std::span{rise.value}.first(700)};
  const auto not_yet = settled_by_rate(at_1400, once);
  CHECK_FALSE(not_yet->settled);
  CHECK(*not_yet->wait_s == Approx(1477.0 - 1398.0).margin(15.0));
  CHECK_THAT(not_yet->why, Contains("still changing"));

  const Trace at_1600{std::span{rise.time_s}.first(800), std::span{rise.value}.first(800)};
  CHECK(settled_by_rate(at_1600, once)->settled);
  CHECK_FALSE(settled_by_rate(at_1600, {0.5, 300.0, 2, 0.0, false})->settled);
  CHECK_FALSE(settled_by_rate(at_1600, {0.5, 300.0, 1, 300.0, false})->settled);
  CHECK(settled_by_rate(rise.trace(), {0.5, 300.0, 3, 300.0, false})->settled);

  const auto fall = Readings::of([](double t) { return 60.0 - 0.01 * t; }, 1000.0, 2.0, 0.05, 8);
  CHECK_FALSE(settled_by_rate(fall.trace(), once)->settled);
  CHECK(settled_by_rate(fall.trace(), {0.5, 300.0, 1, 0.0, true})->settled);

  const auto brief = settled_by_rate(at_1400, {1.0, 3600.0, 1, 0.0, false});
  CHECK_FALSE(brief->settled);
  // 300 ln(40 (exp(12) - 1)/1) = 4707 s, later than the window fills.
  CHECK(*brief->wait_s == Approx(4707.0 - 1398.0).margin(15.0));
  CHECK_THAT(brief->why, Contains("1.00 in 60 min"));
}

TEST_CASE("a fit's standard errors hold the truth as often as they say") {
  // 200 noisy curves; 95 % of the intervals should hold the end. Binomial: fewer than 179 has probability
  // 1e-3.
  int inside = 0;
  constexpr int kRuns = 200;
  for (int run = 0; run < kRuns; ++run) {
    const auto readings = Readings::of([](double t) { return 70.0 - 45.0 * std::exp(-t / 600.0); }, 1500.0,
                                       10.0, 0.1, 1000 + static_cast<std::uint64_t>(run));
    const auto fit = fit_exponential(readings.trace());
    REQUIRE(fit);
    if (std::abs(fit->end - 70.0) < 1.976 * fit->end_standard_error) ++inside;
  }
  INFO(inside << " of " << kRuns);
  CHECK(inside >= 179);
  CHECK(inside <= 199);
}

TEST_CASE("a prediction is accepted when all conditions hold, and says which do not") {
  const auto curve = [](double t) { return 65.0 - 40.0 * std::exp(-t / 400.0); };
  PredictionCriterion criterion;
  criterion.tolerance = 1.0;
  criterion.slowest_tau_s = 800.0;
  const auto long_enough = Readings::of(curve, 2000.0, 2.0, 0.05, 11);
  const auto good = predict_end(long_enough.trace(), {}, criterion);
  REQUIRE(good);
  INFO(good->why);
  CHECK(good->accepted);
  CHECK(good->end.low < 65.0);
  CHECK(good->end.high > 65.0);
  CHECK(good->end.high - good->end.low < 1.0);
  CHECK(good->wait_s == 0.0);

  const auto early = Readings::of(curve, 400.0, 2.0, 0.05, 12);
  const auto bad = predict_end(early.trace(), {}, criterion);
  REQUIRE(bad);
  CHECK_FALSE(bad->accepted);
  CHECK_FALSE(bad->window_long_enough);
  CHECK_FALSE(bad->enough_rise);
  CHECK_FALSE(bad->remaining_small);
  CHECK_THAT(bad->why,
             Contains("shorter than twice the time constant") && Contains("% of the rise is observed"));
  REQUIRE(bad->wait_s);
  CHECK(*bad->wait_s > 300.0);
}

TEST_CASE("ambient is subtracted from a prediction") {
  const auto room = [](double t) { return 20.0 + 0.001 * t; };
  const auto readings = Readings::of([&](double t) { return room(t) + 40.0 * (1.0 - std::exp(-t / 400.0)); },
                                     2400.0, 2.0, 0.05, 13);
  std::vector<double> ambient;
  for (const double t : readings.time_s) ambient.push_back(room(t));
  const auto prediction = predict_end(readings.trace(), ambient, {1.0, 800.0, true});
  REQUIRE(prediction);
  CHECK(prediction->one.end == Approx(room(2400.0) + 40.0).margin(0.1));
  CHECK_FALSE(predict_end(readings.trace(), std::span{ambient}.first(3), {1.0, 800.0, true}));
}

TEST_CASE("a fan that starts is a change point, a smooth rise is none") {
  const auto smooth =
      Readings::of([](double t) { return 70.0 - 20.0 * std::exp(-t / 120.0) - 25.0 * std::exp(-t / 900.0); },
                   4000.0, 5.0, 0.05, 21);
  const auto none = change_points(smooth.trace());
  REQUIRE(none);
  CHECK(none->empty());

  // At 1200 s the thermal resistance falls by a third: the end drops from 70 to 55.
  const auto before = [](double t) { return 70.0 - 45.0 * std::exp(-t / 900.0); };
  const double at_start = before(1200.0);
  const auto fan = Readings::of(
      [&](double t) {
        return t < 1200.0 ? before(t) : 55.0 + (at_start - 55.0) * std::exp(-(t - 1200.0) / 600.0);
      },
      2600.0, 5.0, 0.05, 22);
  const auto found = change_points(fan.trace());
  REQUIRE(found);
  REQUIRE(found->size() == 1);
  // 128 blocks over 2600 s: a change is placed to a block or two.
  CHECK(found->front() == Approx(1200.0).margin(45.0));

  ThermalCriterion criterion;
  criterion.rate = {0.5, 600.0, 1, 0.0, false};
  const Trace short_after = {std::span{fan.time_s}.first(300), std::span{fan.value}.first(300)};
  const auto verdict = settled_thermally(short_after, {}, criterion);
  REQUIRE(verdict);
  CHECK_FALSE(verdict->settled);
  CHECK_THAT(verdict->why, Contains("counted from a change"));
}

TEST_CASE("a step ends by prediction when allowed, else by rate") {
  const auto readings =
      Readings::of([](double t) { return 65.0 - 40.0 * std::exp(-t / 300.0); }, 1500.0, 2.0, 0.05, 31);
  ThermalCriterion criterion;
  criterion.rate = {0.2, 1200.0, 1, 0.0, false};
  criterion.prediction = PredictionCriterion{1.0, 600.0, true};
  const auto predicted = settled_thermally(readings.trace(), {}, criterion);
  REQUIRE(predicted);
  INFO(predicted->why);
  CHECK(predicted->settled);
  CHECK(predicted->by == SettledBy::prediction);
  CHECK(predicted->end_predicted);
  CHECK(predicted->end->value == Approx(65.0).margin(0.2));

  criterion.prediction->may_end_step = false;
  const auto waits = settled_thermally(readings.trace(), {}, criterion);
  REQUIRE(waits);
  CHECK_FALSE(waits->settled);
  CHECK_THAT(waits->why, Contains("still changing") && Contains("prediction: predicted end"));

  const auto rested =
      Readings::of([](double t) { return 65.0 - 40.0 * std::exp(-t / 300.0); }, 4000.0, 2.0, 0.05, 32);
  const auto measured = settled_thermally(rested.trace(), {}, criterion);
  REQUIRE(measured);
  CHECK(measured->settled);
  CHECK(measured->by == SettledBy::thermal_rate);
  CHECK_FALSE(measured->end_predicted);
  CHECK(measured->end->value == Approx(65.0).margin(0.1));
}

TEST_CASE("a trace that never moved is settled by rate without a fit") {
  const auto flat = Readings::of([](double) { return 23.0; }, 1200.0, 2.0, 0.05, 41);
  ThermalCriterion criterion;
  criterion.rate = {1.0, 600.0, 1, 0.0, false};
  criterion.prediction = PredictionCriterion{1.0, 0.0, true};
  CHECK(settled_thermally(flat.trace(), {}, criterion)->settled);
  CHECK_FALSE(fit_exponential(flat.trace()));
}

TEST_CASE("broken traces are refused") {
  const std::vector<double> time_s = {0, 1, 2, 2, 3, 4};
  const std::vector<double> value = {1, 2, 3, 4, 5, 6};
  const auto refused = settled_by_slope({time_s, value}, {1.0, 1.0, 3});
  REQUIRE_FALSE(refused);
  CHECK(refused.refusal().reason == "sample 4: times must rise and values be finite");
  CHECK_FALSE(settled_by_rate({time_s, value}, {}));
  CHECK_FALSE(fit_exponential({time_s, value}));
  CHECK_FALSE(predict_end({time_s, value}, {}, {}));
  CHECK_FALSE(change_points({time_s, value}));
  const std::vector<double> good_time = {0, 1, 2, 3, 4, 5};
  std::vector<double> hole = value;
  hole[2] = std::nan("");
  CHECK_FALSE(settled_by_slope({good_time, hole}, {1.0, 1.0, 3}));
  CHECK_FALSE(fit_exponential({good_time, hole}));
  CHECK_FALSE(settled_by_slope({good_time, value}, {0.0, 1.0, 3}));
  CHECK_FALSE(settled_by_rate({good_time, value}, {0.0, 1.0, 1, 0.0, false}));
}

}  // namespace
}  // namespace loadstair::settling
