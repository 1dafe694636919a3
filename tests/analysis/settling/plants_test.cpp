// Predictions against simulated plants whose slow parts the window may not show. The plants share nothing
// with the fits but the sum of exponentials that a thermal network is (methods: accepted predictions hold in
// at least 93 %).
#include <catch2/catch.hpp>
#include <cmath>
#include <cstdlib>
#include <random>
#include <string>
#include <vector>

#include "analysis/base/number.h"
#include "analysis/settling/hold_out.h"
#include "analysis/settling/settling.h"

namespace loadstair::settling {
namespace {

class Draws {
 public:
  explicit Draws(std::uint64_t seed) : random_{seed} {}
  double uniform(double low, double high) {
    return low + (high - low) * (static_cast<double>(random_() >> 11) + 0.5) * 0x1p-53;
  }
  double log_uniform(double low, double high) { return low * std::pow(high / low, uniform(0.0, 1.0)); }
  double normal() {
    return std::sqrt(-2.0 * std::log(uniform(0.0, 1.0))) * std::cos(6.283185307179586 * uniform(0.0, 1.0));
  }

 private:
  std::mt19937_64 random_;
};

struct Plant {
  double start, rise;
  std::vector<double> share, tau_s;

  [[nodiscard]] double at(double t) const {
    double value = start;
    for (std::size_t i = 0; i < share.size(); ++i) value -= rise * share[i] * std::expm1(-t / tau_s[i]);
    return value;
  }
};

/// Two or three constants in a window; the slow part has 5 to 40 % and up to three times the window.
Plant draw_plant(Draws& draws, double window_s) {
  Plant plant{draws.uniform(18.0, 30.0), draws.uniform(15.0, 60.0), {}, {}};
  const double slow_share = draws.uniform(0.05, 0.40);
  const double slow = draws.log_uniform(0.25 * window_s, 3.0 * window_s);
  const double middle = draws.log_uniform(0.03 * window_s, 0.25 * window_s);
  if (draws.uniform(0.0, 1.0) < 0.5) {
    plant.share = {1.0 - slow_share, slow_share};
    plant.tau_s = {middle, slow};
  } else {
    const double fast_share = draws.uniform(0.1, 0.5) * (1.0 - slow_share);
    plant.share = {fast_share, 1.0 - slow_share - fast_share, slow_share};
    plant.tau_s = {draws.uniform(0.1, 0.5) * middle, middle, slow};
  }
  return plant;
}

std::uint64_t seed_of_environment() {
  const char* text = std::getenv("LOADSTAIR_SEED");
  return text == nullptr ? 20240611 : static_cast<std::uint64_t>(base::parse_integer(text).value_or(1));
}

struct Tally {
  int tried = 0, accepted = 0, held = 0;
};

struct Record {
  std::vector<double> time_s, value;
};

Record record_of(Draws& draws, const Plant& plant, double duration_s, int readings, double noise,
                 double resolution) {
  Record out;
  for (int k = 0; k <= readings; ++k) {
    const double t = duration_s * k / readings;
    double reading = plant.at(t) + noise * draws.normal();
    if (resolution > 0.0) reading = resolution * std::round(reading / resolution);
    out.time_s.push_back(t);
    out.value.push_back(reading);
  }
  return out;
}

Tally run_plants(Draws& draws, int plants, double noise, double resolution, bool one_constant) {
  Tally tally;
  for (int p = 0; p < plants; ++p) {
    const double window_s = draws.log_uniform(300.0, 7200.0);
    Plant plant = draw_plant(draws, window_s);
    if (one_constant) {
      plant.share = {1.0};
      plant.tau_s = {draws.uniform(0.1, 0.35) * window_s};
    }
    const Record record = record_of(draws, plant, window_s, 400, noise, resolution);
    const auto prediction = predict_end({record.time_s, record.value}, {}, {1.5, 0.0, true});
    ++tally.tried;
    if (!prediction || !prediction->accepted) continue;
    ++tally.accepted;
    const double end = plant.start + plant.rise;
    if (prediction->end.low <= end && end <= prediction->end.high) ++tally.held;
  }
  return tally;
}

TEST_CASE("accepted predictions hold the true end in at least 93 % of simulated plants") {
  const std::uint64_t seed = seed_of_environment();
  Draws draws{seed};
  Tally together;
  struct Kind {
    const char* name;
    double noise, resolution;
    bool one_constant;
  };
  for (const Kind kind : {Kind{"two or three constants, 0.05 K noise", 0.05, 0.0, false},
                          Kind{"two or three constants, 0.1 K resolution", 0.02, 0.1, false},
                          Kind{"one constant, 0.05 K noise", 0.05, 0.0, true}}) {
    constexpr int kPlants = 300;
    const Tally tally = run_plants(draws, kPlants, kind.noise, kind.resolution, kind.one_constant);
    WARN(kind.name << ": " << tally.accepted << " of " << tally.tried << " accepted ("
                   << 100 * (tally.tried - tally.accepted) / tally.tried << " % refused), " << tally.held
                   << " hold; seed " << seed);
    CHECK(tally.accepted > 0);
    // Of one kind few are accepted: misses beyond 7 % by three binomial deviations, a false alarm in about
    // 1000.
    const double n = tally.accepted;
    CHECK(n - tally.held <= 0.07 * n + 3.0 * std::sqrt(0.07 * 0.93 * n) + 1.0);
    together.accepted += tally.accepted;
    together.held += tally.held;
  }
  CHECK(together.held >= 0.93 * together.accepted);
}

TEST_CASE("one constant seen for an hour does not hide 3000 s with 30 % of the rise") {
  // The window is 1.2 of the slow constant: what is accepted has to hold, and twice the constant is not
  // reached.
  Draws draws{seed_of_environment() + 1};
  Tally together;
  for (const double noise : {0.01, 0.05, 0.2, 0.5}) {
    for (const double resolution : {0.0, 0.1}) {
      Tally tally;
      for (int p = 0; p < 40; ++p) {
        const double fast_s = draws.log_uniform(60.0, 900.0);
        const Plant plant{23.0, draws.uniform(15.0, 60.0), {0.7, 0.3}, {fast_s, 3000.0}};
        const Record record = record_of(draws, plant, 3600.0, 720, noise, resolution);
        const auto prediction = predict_end({record.time_s, record.value}, {}, {1.0, 0.0, true});
        ++tally.tried;
        if (!prediction || !prediction->accepted) continue;
        ++tally.accepted;
        const double end = plant.start + plant.rise;
        if (prediction->end.low <= end && end <= prediction->end.high) ++tally.held;
      }
      INFO("noise " << noise << " K, resolution " << resolution << " K");
      // Never confidently wrong: one miss of 40 is the most that 95 % intervals of a few accepted ones
      // explain.
      CHECK(tally.accepted - tally.held <= 1);
      together.tried += tally.tried;
      together.accepted += tally.accepted;
      together.held += tally.held;
    }
  }
  WARN("3000 s with 30 %, seen for one hour: " << together.accepted << " of " << together.tried
                                               << " accepted, " << together.held << " hold");
  CHECK(together.held >= 0.93 * together.accepted);
}

TEST_CASE("the first of many predictions that is accepted holds too") {
  // A step is looked at again and again, and the first acceptable prediction ends it: what is picked so must
  // hold as often as one that was looked at once. Traces of one to six hours, 20 looks.
  Draws draws{seed_of_environment() + 2};
  Tally tally;
  for (int p = 0; p < 40; ++p) {
    const Plant plant = draw_plant(draws, 3600.0);
    const Record record = record_of(draws, plant, draws.log_uniform(3600.0, 21600.0), 600,
                                    draws.log_uniform(0.02, 0.2), p % 2 == 0 ? 0.0 : 0.1);
    ThermalCriterion criterion;
    criterion.prediction = PredictionCriterion{1.5, 0.0, true};
    const auto found = hold_out({record.time_s, record.value}, {}, criterion, {20});
    REQUIRE(found);
    ++tally.tried;
    if (!found->has_value()) continue;
    ++tally.accepted;
    const double end = plant.start + plant.rise;
    if ((*found)->predicted.low <= end && end <= (*found)->predicted.high) ++tally.held;
  }
  WARN("first accepted of 20 looks: " << tally.accepted << " of " << tally.tried << " plants, " << tally.held
                                      << " hold");
  CHECK(tally.accepted >= 5);
  // Three binomial deviations beyond 7 %, as above.
  const double n = tally.accepted;
  CHECK(n - tally.held <= 0.07 * n + 3.0 * std::sqrt(0.07 * 0.93 * n));
}

}  // namespace
}  // namespace loadstair::settling
