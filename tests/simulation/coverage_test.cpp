// The short form of the simulation; in full: `simulation coverage` (tests/deep.sh simulation).
#include <catch2/catch.hpp>
#include <cstdlib>

#include "analysis/base/number.h"
#include "simulation/study.h"

using namespace loadstair;
using namespace loadstair::simulation;

namespace {

std::uint64_t first_seed() {
  const char* given = std::getenv("LOADSTAIR_SEED");
  return static_cast<std::uint64_t>(given == nullptr ? 1 : base::parse_integer(given).value_or(1));
}

}  // namespace

TEST_CASE("95 % intervals of efficiency, loss and difference hold the truth of drawn benches") {
  // 400 independent draws. If the intervals hold at exactly 95 %, fewer than 365 of 400 (0.9125) happens with
  // probability 0.0005 (binomial); if they hold at 93 %, the worst that the full form lets pass, fewer than
  // 355 (0.8875) with 0.0007. The bound is the second, so that a program that passes in full passes here.
  constexpr std::uint64_t kDraws = 400;
  const Study study = run_study(first_seed(), kDraws, {});
  INFO("seed " << first_seed() << "\n" << described(study));
  CHECK(study.efficiency.share() >= 0.8875);
  CHECK(study.loss.share() >= 0.8875);
  CHECK(study.difference.share() >= 0.8875);
  CHECK(study.efficiency.unknown == 0);
  // Inflated intervals hold always: the width is what keeps them honest.
  for (const Tally* one : {&study.efficiency, &study.loss, &study.difference}) {
    CHECK(one->median_width_ratio() >= 0.95);
    CHECK(one->median_width_ratio() <= 1.25);
  }
}

TEST_CASE("benches that the model does not describe are held, or warned of") {
  // 60 draws each; at 93 % true, fewer than 47 of 60 happens with probability below 0.0001 (binomial).
  for (const Trouble one : kTroubles) {
    StudyChoice choice;
    choice.bench.trouble = one;
    choice.with_difference = false;
    const Study study = run_study(first_seed(), 60, choice);
    INFO(name_of(one) << ", seed " << first_seed() << "\n" << described(study));
    CHECK(study.efficiency.share_with_warnings() >= 47.0 / 60.0);
    CHECK(study.loss.share_with_warnings() >= 47.0 / 60.0);
  }
}

TEST_CASE("sources that two runs share narrow their difference by what is shared") {
  // Nothing but shared and unshared shares: 1 / sqrt 0.2 = 2.236 (closed form).
  StudyChoice ideal;
  ideal.bench.quiet = ideal.bench.plain = true;
  const Study defaults = run_study(1, 40, ideal);
  CHECK(median(defaults.narrowing) == Approx(std::sqrt(5.0)).epsilon(0.05));
  CHECK(median(defaults.narrowing_against_expected) == Approx(1.0).epsilon(0.05));
  ideal.bench.repeatability = 0.25;  // of the limits: the unshared share of the variance is 1/16
  CHECK(median(run_study(1, 40, ideal).narrowing) == Approx(4.0).epsilon(0.05));
}

TEST_CASE("what is forecast before power is on is what the run then achieves") {
  const std::vector<double> ratios = forecast_ratios(1, 40);
  CHECK(ratios.size() >= 38);
  CHECK(median(ratios) >= 0.8);
  CHECK(median(ratios) <= 1.25);
}
