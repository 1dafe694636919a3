// A fan in mid-step against the criterion that a step is ended by: closed-form plants, so that the true end
// is known at every instant.
#include <catch2/catch.hpp>
#include <cmath>
#include <string>
#include <vector>

#include "analysis/settling/settling.h"
#include "tests/analysis/random_source.h"

namespace loadstair::settling {
namespace {

/// One node with a heat source: dT/dt = (end - T)/tau, end and tau switched by a fan; exact between switches.
struct FanPlant {
  double slow_end, slow_tau_s;  ///< fan off
  double fan_end, fan_tau_s;    ///< fan on
  /// Instants at which the fan turns: off, on, off, on ...
  std::vector<double> turns_s;

  [[nodiscard]] std::vector<double> at(const std::vector<double>& time_s) const {
    std::vector<double> out;
    double value = 25.0;
    double from_s = 0.0;
    std::size_t turn = 0;
    const auto advance = [&](double to_s) {
      const bool on = turn % 2 == 1;
      const double end = on ? fan_end : slow_end;
      value = end + (value - end) * std::exp(-(to_s - from_s) / (on ? fan_tau_s : slow_tau_s));
      from_s = to_s;
    };
    for (const double t : time_s) {
      while (turn < turns_s.size() && turns_s[turn] <= t) {
        advance(turns_s[turn]);
        ++turn;
      }
      advance(t);
      out.push_back(value);
    }
    return out;
  }
};

struct Step {
  std::vector<double> time_s, value;

  /// The verdict that the step would have had at t.
  [[nodiscard]] Verdict at(double t_s, const ThermalCriterion& criterion) const {
    std::size_t count = 0;
    while (count < time_s.size() && time_s[count] <= t_s) ++count;
    const auto verdict =
        settled_thermally({std::span{time_s}.first(count), std::span{value}.first(count)}, {}, criterion);
    REQUIRE(verdict);
    return *verdict;
  }
};

Step run(const FanPlant& plant, double duration_s, double noise, std::uint64_t seed) {
  tests::RandomSource random{seed};
  Step out;
  for (double t = 0.0; t <= duration_s; t += 5.0) out.time_s.push_back(t);
  out.value = plant.at(out.time_s);
  for (double& value : out.value) value += noise * random.normal();
  return out;
}

TEST_CASE("a fan that starts just before the criterion is met does not fool it") {
  // tau 600 s, 45 K, 1 K in 600 s: met at 600 ln(45 (e - 1)/1) = 2609 s (closed form). The fan starts at 2500
  // s and takes the end from 70 to 52 degC.
  ThermalCriterion criterion;
  criterion.rate = {1.0, 600.0, 1, 0.0, false};
  for (const bool predict : {false, true}) {
    if (predict) criterion.prediction = PredictionCriterion{1.0, 1200.0, true};
    for (const double noise : {0.0, 0.05, 0.2}) {
      const FanPlant plant{70.0, 600.0, 52.0, 400.0, {2500.0}};
      const Step step = run(plant, 6000.0, noise, 17);
      INFO("noise " << noise << ", prediction " << predict);
      // Before, by rate: at 2200 s the change is 45 (e - 1) exp(-2200/600) = 1.98 K.
      if (!predict) CHECK_FALSE(step.at(2200.0, criterion).settled);
      // From when the fall is larger than its noise until it is within 1 K of its end at 400 ln(18/1) = 1156
      // s.
      for (double t = 2600.0; t < 2500.0 + 1100.0; t += 100.0) {
        const Verdict verdict = step.at(t, criterion);
        INFO("at " << t << " s: " << verdict.why);
        if (verdict.settled) {
          // Only a prediction may end it here, and it has to be right.
          CHECK(verdict.by == SettledBy::prediction);
          CHECK(verdict.end->low <= 52.0);
          CHECK(verdict.end->high >= 52.0);
        }
      }
      const Verdict end = step.at(6000.0, criterion);
      CHECK(end.settled);
      REQUIRE(end.end);
      CHECK(end.end->value == Approx(52.0).margin(0.1 + noise));
    }
  }
}

TEST_CASE("a fan's fall that crosses the rise is not a small change") {
  // Between the ends of the window the value is the same; in between it was 6 K higher.
  ThermalCriterion criterion;
  criterion.rate = {1.0, 600.0, 1, 0.0, false};
  const FanPlant plant{90.0, 900.0, 40.0, 500.0, {900.0}};
  const Step step = run(plant, 4000.0, 0.05, 23);
  int traps = 0;
  for (double t = 900.0; t < 1700.0; t += 20.0) {
    const std::vector<double> ends = plant.at({t - 600.0, t});
    if (std::abs(ends[1] - ends[0]) > 0.7) continue;
    ++traps;
    const auto count = static_cast<std::size_t>(t / 5.0) + 1;
    const auto by_rate = settled_by_rate(
        {std::span{step.time_s}.first(count), std::span{step.value}.first(count)}, criterion.rate);
    REQUIRE(by_rate);
    INFO(t << " s: " << by_rate->why);
    CHECK_FALSE(by_rate->settled);
    CHECK_FALSE(step.at(t, criterion).settled);
  }
  CHECK(traps > 0);
}

TEST_CASE("a fan that cycles is never called settled at an end that it does not have") {
  // On for 300 s, off for 300 s: the case swings by several kelvin for ever.
  ThermalCriterion criterion;
  criterion.rate = {1.0, 600.0, 2, 0.0, false};
  criterion.prediction = PredictionCriterion{1.0, 0.0, true};
  FanPlant plant{75.0, 500.0, 45.0, 300.0, {}};
  for (double t = 1000.0; t < 12000.0; t += 300.0) plant.turns_s.push_back(t);
  const Step step = run(plant, 9000.0, 0.05, 29);
  // Over whole cycles the lowest and the highest value differ by more than the criterion's change.
  double low = 1e9;
  double high = -1e9;
  for (std::size_t i = 1600; i < step.value.size(); ++i) {
    low = std::min(low, step.value[i]);
    high = std::max(high, step.value[i]);
  }
  REQUIRE(high - low > 3.0);
  int settled = 0;
  int looks = 0;
  for (double t = 1500.0; t <= 9000.0; t += 130.0) {
    const Verdict verdict = step.at(t, criterion);
    ++looks;
    if (!verdict.settled) continue;
    ++settled;
    UNSCOPED_INFO("settled at " << t << " s: " << verdict.why);
  }
  CHECK(settled == 0);
  WARN("cycling fan, swing " << high - low << " K: settled at " << settled << " of " << looks << " looks");
}

}  // namespace
}  // namespace loadstair::settling
