#include "analysis/efficiency/comparison.h"

#include <array>
#include <catch2/catch.hpp>
#include <cmath>
#include <iostream>
#include <limits>
#include <vector>

#include "analysis/estimate/coverage.h"
#include "analysis/estimate/sharing.h"
#include "analysis/estimate/type_a.h"
#include "tests/analysis/random_source.h"
#include "tests/analysis/rscript.h"

using namespace loadstair;
using efficiency::ComparedRun;
using efficiency::ComparisonInput;
using efficiency::CurvePoint;
using efficiency::Decided;
using estimate::Estimate;

namespace {

constexpr double kRated = 240;

/// Four meters on a 48 V to 12 V converter, each +-0.3 % of reading, rectangular.
struct Bench {
  estimate::Shares shares;
  double percent = 0.3;
  double noise_w = 0;  ///< Type A, standard uncertainty of the input power, with 15 degrees of freedom

  [[nodiscard]] Estimate read(const std::string& meter, double shown, const std::string& run,
                              const std::string& level) const {
    estimate::MeterRange range;
    range.meter = {meter, "dc", "100"};
    range.range = 100;
    range.accuracy = estimate::AccuracySpec{percent, 0, 0, estimate::Distribution::rectangular, 2};
    return *estimate::with_meter_error(shown, range, {run, level + meter}, shares);
  }
  /// errors   relative, of V in, I in, V out, I out
  [[nodiscard]] CurvePoint level(const std::string& run, double load_w, double loss_w,
                                 const std::array<double, 4>& errors = {}) const {
    const std::string label = std::to_string(std::lround(100 * load_w / kRated)) + " %";
    const Estimate input = read("V1", 48 * (1 + errors[0]), run, label) *
                           read("A1", (load_w + loss_w) / 48 * (1 + errors[1]), run, label);
    const Estimate output =
        read("V2", 12 * (1 + errors[2]), run, label) * read("A2", load_w / 12 * (1 + errors[3]), run, label);
    const Estimate noise{0, estimate::make_type_a(estimate::key::window(run, label, "noise"), "noise", 15),
                         noise_w};
    const Estimate noisy = input + noise;
    return {label, noisy, output, noisy - output, output / noisy};
  }
};

ComparedRun run_of(const std::string& run, const std::string& unit, std::vector<CurvePoint> points) {
  ComparedRun out;
  out.run = run;
  out.unit = unit;
  out.points = std::move(points);
  return out;
}

/// The reference loses 12 W at 120 W, the other one `better_w` less.
ComparisonInput one_level(const Bench& bench, double better_w) {
  return {run_of("1", "C-003", {bench.level("1", 120, 12)}),
          run_of("2", "D-001", {bench.level("2", 120, 12 - better_w)}),
          kRated,
          {},
          false};
}

efficiency::Difference only_level(const ComparisonInput& input) {
  const auto compared = efficiency::compare(input);
  REQUIRE(compared);
  REQUIRE(compared->levels.size() == 1);
  return compared->levels[0];
}

double half_width(const efficiency::Difference& of) {
  return estimate::coverage(*of.efficiency).expanded;
}

bool says(const std::string& text, const std::string& part) {
  return text.find(part) != std::string::npos;
}

}  // namespace

// Equal boards, equal sensitivities: the variance of a difference is the unshared share of what it would be
// without anything in common (JCGM 100:2008 F.1.2.3).
TEST_CASE("common sources narrow a difference by one over the root of the unshared share") {
  for (const double fixed : {0.0, 0.3, 0.5, 0.8, 0.9, 0.95}) {
    Bench bench;
    bench.shares = {fixed, (1 - fixed) / 2, (1 - fixed) / 2};
    const auto level = only_level(one_level(bench, 0));
    CHECK(level.unshared == Approx(1 - fixed).margin(1e-9));
    CHECK(level.narrowing == Approx(1 / std::sqrt(1 - fixed)).epsilon(0.05));
  }
  const auto by_default = only_level(one_level(Bench{}, 0));
  std::cout << "comparison: narrowing at default shares " << by_default.narrowing << "\n";
  CHECK(by_default.narrowing >= 2);
  CHECK(by_default.narrowing == Approx(2.236).epsilon(0.05));
}

TEST_CASE("a declared repeatability narrows further") {
  Bench bench;
  estimate::MeterRange meter;
  meter.meter = {"V1", "dc", "100"};
  meter.range = 100;
  meter.accuracy = estimate::AccuracySpec{0.3, 0, 0, estimate::Distribution::rectangular, 2};
  const auto shares = estimate::shares_from_repeatability(48, meter, {0.09, 0, 0});
  REQUIRE(shares);
  bench.shares = *shares;
  const auto level = only_level(one_level(bench, 0));
  std::cout << "comparison: narrowing with a repeatability of 0.3 of the accuracy " << level.narrowing
            << "\n";
  CHECK(level.narrowing >= 3);
  CHECK(level.narrowing == Approx(1 / 0.3).epsilon(0.05));
}

TEST_CASE("what is set apart does not cancel, and keeps its size") {
  Bench bench;
  ComparisonInput input = one_level(bench, 0);
  input.not_common = {"V1", "A1", "V2", "A2"};
  const auto level = only_level(input);
  CHECK(level.unshared == Approx(1));
  CHECK(level.narrowing == Approx(1).epsilon(1e-9));
  // Two independent measurements of one efficiency: sqrt 2 times its own uncertainty.
  const auto& point = input.reference.points[0];
  const double relative = std::sqrt(4.0) * 0.003 / std::sqrt(3.0);
  CHECK(point.efficiency.standard_uncertainty() == Approx(120.0 / 132 * relative));
  CHECK(level.efficiency->standard_uncertainty() ==
        Approx(std::sqrt(2.0) * 120 / 132 * relative).epsilon(0.03));
  input.not_common = {"V1"};
  CHECK(only_level(input).unshared == Approx(0.2 + 0.8 / 4).epsilon(0.01));
}

// Equal sensitivities: u(s)^2 = s u(1)^2, so |d| = k u(s) at s = (d / (k u(1)))^2.
TEST_CASE("the share at which an answer flips, in closed form") {
  const double k =
      1.959963984540054;  // normal quantile, JCGM 100:2008 table G.2 at infinite degrees of freedom
  const auto flip = [&](double better_w) {
    const auto level = only_level(one_level(Bench{}, better_w));
    const double u_of_none = half_width(level) * level.narrowing / k;
    const double s = std::pow(level.efficiency->value() / (k * u_of_none), 2);
    return std::pair{level, s};
  };
  const auto [better, s_better] = flip(0.8);
  CHECK(better.decided == Decided::better);
  REQUIRE(better.flips_at);
  CHECK(*better.flips_at > better.unshared);
  CHECK(*better.flips_at == Approx(s_better).epsilon(0.01));
  CHECK(says(better.text, "unit D-001 against C-003 at 50 %: better by 0."));
  CHECK(says(better.text, "it holds up to an unshared share of "));
  const auto [unclear, s_unclear] = flip(0.3);
  CHECK(unclear.decided == Decided::not_resolved);
  REQUIRE(unclear.flips_at);
  CHECK(*unclear.flips_at < unclear.unshared);
  CHECK(*unclear.flips_at == Approx(s_unclear).epsilon(0.05));
  CHECK(says(unclear.text, "it would be resolved below an unshared share of "));
  const auto [large, s_large] = flip(4);
  CHECK(s_large > 1);
  CHECK_FALSE(large.flips_at);
  CHECK(says(large.text, "no unshared share of the meters' variance would flip it"));
  const auto [worse, s_worse] = flip(-0.8);
  CHECK(worse.decided == Decided::worse);
  CHECK(*worse.flips_at == Approx(s_worse).epsilon(0.01));
}

TEST_CASE("noise that no meter causes can leave a difference that no share would resolve") {
  Bench bench;
  bench.noise_w = 2;
  const auto level = only_level(one_level(bench, 0.5));
  CHECK(level.decided == Decided::not_resolved);
  CHECK_FALSE(level.flips_at);
  CHECK(says(level.text, "no unshared share of the meters' variance would resolve it"));
}

TEST_CASE("other meters in the second run have nothing in common with the first one's") {
  ComparisonInput input = one_level(Bench{}, 0.8);
  for (CurvePoint& point : input.other.points) {
    std::vector<estimate::Term> terms;
    const auto renamed = [](const Estimate& of) {
      std::vector<estimate::Term> out;
      for (const auto& term : of.terms()) {
        estimate::Source source = *term.source;
        source.owner.instrument += "b";
        source.key.insert(source.key.find('/') + 3, "b");
        out.push_back({estimate::make_source(source), term.contribution});
      }
      return Estimate{of.value(), out};
    };
    point = {point.label, renamed(point.input_power), renamed(point.output_power), renamed(point.loss),
             renamed(point.efficiency)};
  }
  const auto level = only_level(input);
  CHECK(level.unshared == Approx(1));
  CHECK(level.decided == Decided::not_resolved);
  CHECK_FALSE(level.flips_at);
}

TEST_CASE("levels are moved to a common load along the loss") {
  // Loss 2 + 0.02 P + 0.0005 P^2 in both runs, at loads 1 % of rated apart: no difference once moved.
  const auto loss = [](double p) { return 2 + p * (0.02 + p * 0.0005); };
  Bench bench;
  std::vector<CurvePoint> ours;
  std::vector<CurvePoint> theirs;
  for (const double load_w : {30.0, 60.0, 120.0, 180.0, 240.0}) {
    ours.push_back(bench.level("1", load_w, loss(load_w)));
    theirs.push_back(bench.level("2", load_w - 2.4, loss(load_w - 2.4)));
    theirs.back().label = ours.back().label;
  }
  ComparisonInput input{run_of("1", "", ours), run_of("2", "", theirs), kRated, {}, false};
  input.reference.pieces = efficiency::fit_loss_models(ours, 0.001);
  input.other.pieces = efficiency::fit_loss_models(theirs, 0.001);
  REQUIRE((input.reference.pieces.front().usable() && input.other.pieces.front().usable()));
  const auto moved = efficiency::compare(input);
  REQUIRE(moved);
  for (const auto& level : moved->levels) {
    INFO(level.text);
    // Second order: 0.0005 (1.2 W)^2 of loss on either side cancels.
    CHECK(std::abs(level.loss->value()) < 1e-6);
    CHECK(std::abs(level.efficiency->value()) < 1e-7);
    CHECK(level.load_w ==
          Approx(ours[static_cast<std::size_t>(&level - moved->levels.data())].output_power.value() - 1.2));
    CHECK(says(level.text, "run 2 against run 1 at "));
  }
  // Without a model the neighbours' slope is coarser, and says so by its interval.
  input.reference.pieces.clear();
  input.other.pieces.clear();
  const auto coarse = efficiency::compare(input);
  REQUIRE(coarse);
  for (std::size_t i = 0; i < coarse->levels.size(); ++i) {
    const auto& level = coarse->levels[i];
    CHECK(std::abs(level.efficiency->value()) < half_width(level));
    CHECK(half_width(level) >= half_width(moved->levels[i]));
  }
}

TEST_CASE("loads, voltages and levels that do not meet are refused with the reason") {
  Bench bench;
  ComparisonInput input{
      run_of("1", "C-003", {bench.level("1", 60, 6), bench.level("1", 120, 12), bench.level("1", 180, 20)}),
      run_of("2", "D-001", {bench.level("2", 66, 6), bench.level("2", 120, 11), bench.level("2", 240, 29)}),
      kRated,
      {},
      false};
  input.other.points[0].label = "25 %";
  input.reference.around = {{48, 23}, {48, 23}, {48, 23}};
  input.other.around = {{48, 23}, {49, 23}, {48, 23}};
  const auto compared = efficiency::compare(input);
  REQUIRE(compared);
  REQUIRE(compared->levels.size() == 4);
  CHECK(says(compared->levels[0].text, "2.5 % of rated power apart"));
  CHECK(says(compared->levels[1].text, "input voltages lie too far apart (49.00 V against 48.00 V)"));
  CHECK(says(compared->levels[2].text, "run 2 has no such level"));
  CHECK(says(compared->levels[3].text,
             "run 1 has no such level: its nearest is at 180.0 W, this one at 240.0 W"));
  for (const auto& level : compared->levels) CHECK(level.decided == Decided::refused);
  input.rated_w = 0;
  CHECK_FALSE(efficiency::compare(input));
}

// Rectangular, +-2 |dV/V| of the loss and +-0.4 %/K of it: common practice, no source.
TEST_CASE("another input voltage and another ambient widen the difference of losses") {
  ComparisonInput input = one_level(Bench{}, 0);
  const double alone = only_level(input).loss->variance();
  input.reference.around = {{48, 20}};
  input.other.around = {{48.48, 30}};
  const auto level = only_level(input);
  const double added = (std::pow(0.02 * 12, 2) + std::pow(0.04 * 12, 2)) / 3;
  CHECK(level.loss->variance() - alone == Approx(added).epsilon(1e-6));
}

TEST_CASE("where a slope of the loss is given, the other run is moved along it") {
  // The other board loses 0.3 W more because its input lies 0.5 V higher, and 0.25 W because it is 5 K
  // warmer.
  ComparisonInput input = one_level(Bench{}, -0.55);
  const auto alone = only_level(input);
  CHECK(alone.loss->value() == Approx(0.55));
  input.reference.around = {{48, 20}};
  input.other.around = {{48.5, 25}};
  const auto slope = [](const char* key, double value, double u) {
    return Estimate{value, estimate::make_type_b(key, key, estimate::Distribution::normal), u};
  };
  input.other.around[0].loss_per_volt = slope("per volt", 0.6, 0.1);
  input.reference.around[0].loss_per_kelvin = slope("per kelvin", 0.05, 0.01);
  const auto level = only_level(input);
  CHECK(std::abs(level.loss->value()) < 1e-9);
  CHECK(std::abs(level.efficiency->value()) < 1e-9);
  const double added = std::pow(0.5 * 0.1, 2) + std::pow(5 * 0.01, 2);
  CHECK(level.loss->variance() - alone.loss->variance() == Approx(added).epsilon(1e-6));
  // The other run's own slope comes first.
  input.reference.around[0].loss_per_volt = slope("of the reference", 6, 1);
  CHECK(std::abs(only_level(input).loss->value()) < 1e-9);
}

TEST_CASE("comparisons of any numbers are finite or refused") {
  const double inf = std::numeric_limits<double>::infinity();
  const double nan = std::numeric_limits<double>::quiet_NaN();
  Bench bench;
  for (const double strange : {nan, inf, -inf, 1e300, -1e300, 0.0, -5.0, 1e-300}) {
    for (int which = 0; which < 9; ++which) {
      std::vector<CurvePoint> theirs{bench.level("2", 60, 6), bench.level("2", 120, 12),
                                     bench.level("2", 180, 20)};
      ComparisonInput input{
          run_of("1", "C-003",
                 {bench.level("1", 60, 6), bench.level("1", 121, 12), bench.level("1", 180, 20)}),
          run_of("2", "D-001", theirs),
          kRated,
          {},
          false};
      input.reference.around = {{48, 23}, {48, 23}, {48, 23}};
      input.other.around = {{48.1, 24}, {48.1, 24}, {48.1, 24}};
      CurvePoint& point = input.other.points[static_cast<std::size_t>(which) % 3];
      auto& around = input.other.around[1];
      if (which == 0) point.output_power = point.output_power.with_value(strange);
      if (which == 1) point.loss = point.loss.with_value(strange);
      if (which == 2) point.efficiency = point.efficiency.with_value(strange);
      if (which == 3) around.input_voltage_v = strange;
      if (which == 4) around.ambient_c = strange;
      if (which == 5) around.loss_per_volt = Estimate{strange};
      if (which == 6) around.loss_per_kelvin = Estimate{strange};
      if (which == 7) input.rated_w = strange;
      if (which == 8) input.other.weighted = {{"European efficiency", Estimate{strange}}};
      input.reference.weighted = {{"European efficiency", Estimate{0.95}}};
      const auto compared = efficiency::compare(input);
      if (!compared) continue;
      INFO(strange << " in place " << which);
      std::vector<efficiency::Difference> all = compared->levels;
      all.insert(all.end(), compared->weighted.begin(), compared->weighted.end());
      for (const auto& level : all) {
        CHECK(level.text.find("nan") == std::string::npos);
        CHECK(level.text.find("inf") == std::string::npos);
        CHECK(std::isfinite(level.narrowing));
        CHECK(std::isfinite(level.adjusted_p));
        if (!level.efficiency) {
          CHECK_FALSE(level.efficiency.refusal().reason.empty());
          continue;
        }
        CHECK(std::isfinite(level.efficiency->value()));
        CHECK(std::isfinite(half_width(level)));
        if (level.loss) CHECK(std::isfinite(level.loss->value()));
      }
    }
  }
}

TEST_CASE("Holm's method is R's") {
  tests::RandomSource random{tests::seed_of_tests()};
  for (const std::size_t many : {1U, 2U, 6U, 13U}) {
    std::vector<double> p(many);
    for (double& one : p) one = std::pow(random.uniform(), 3);
    if (many > 2) p[1] = p[0];
    const auto by_r = tests::rscript("out(p.adjust(x[[1]], 'holm'))", {p});
    const auto ours = efficiency::holm_adjusted(p);
    REQUIRE(by_r.size() == many);
    for (std::size_t i = 0; i < many; ++i) CHECK(ours[i] == Approx(by_r[i]).epsilon(1e-12));
  }
  CHECK(efficiency::holm_adjusted(std::vector<double>{}).empty());
}

TEST_CASE("a level that is resolved alone need not be among many") {
  Bench bench;
  bench.shares = {0.8, 0.0, 0.2};
  const auto with_levels = [&](std::size_t many) {
    std::vector<CurvePoint> ours;
    std::vector<CurvePoint> theirs;
    for (std::size_t i = 0; i < many; ++i) {
      const double load_w = 40 * static_cast<double>(i + 1);
      ours.push_back(bench.level("1", load_w, load_w / 10));
      theirs.push_back(bench.level("2", load_w, load_w / 10 - (i == 0 ? 0.22 : 0)));
    }
    return *efficiency::compare(
        {run_of("1", "C-003", ours), run_of("2", "D-001", theirs), kRated, {}, false});
  };
  const auto alone = with_levels(1);
  CHECK(alone.levels[0].decided == Decided::better);
  const auto among = with_levels(6);
  CHECK(std::abs(among.levels[0].efficiency->value()) > half_width(among.levels[0]));
  CHECK(among.levels[0].decided == Decided::not_resolved);
  CHECK(says(among.levels[0].text, "alone it would be, among 6 judged together it is not"));
}

TEST_CASE("weighted figures of one title are compared, and reconnection is spoken of") {
  Bench bench;
  ComparisonInput input = one_level(bench, 0.8);
  input.reference.weighted = {{"European efficiency", input.reference.points[0].efficiency},
                              {"CEC-weighted", base::Refusal{"CEC-weighted", "no level"}}};
  input.other.weighted = {{"European efficiency", input.other.points[0].efficiency},
                          {"CEC-weighted", input.other.points[0].efficiency}};
  const auto compared = efficiency::compare(input);
  REQUIRE(compared);
  REQUIRE(compared->weighted.size() == 1);
  CHECK(compared->weighted[0].decided == Decided::better);
  CHECK(says(compared->weighted[0].text, "unit D-001 against C-003, European efficiency: better by 0."));
  const auto untested = [](const efficiency::Comparison& of) {
    return std::any_of(of.remarks.begin(), of.remarks.end(), [](const std::string& remark) {
      return says(remark, "repeatability was not tested");
    });
  };
  CHECK(untested(*compared));
  input.reconnected = true;
  CHECK_FALSE(untested(*efficiency::compare(input)));
}

namespace {

/// Errors of four meters as the shares say, drawn here.
class Errors {
 public:
  Errors(tests::RandomSource& random, double percent, double unshared)
      : random_{random}, percent_{percent}, unshared_{unshared} {
    for (double& one : fixed_) one = draw(1 - unshared);
  }
  void next_run() {
    for (double& one : run_) one = draw(unshared_ / 2);
  }
  std::array<double, 4> level() {
    std::array<double, 4> out{};
    for (std::size_t i = 0; i < 4; ++i) out[i] = fixed_[i] + run_[i] + draw(unshared_ / 2);
    return out;
  }

 private:
  double draw(double share) { return std::sqrt(share) * percent_ / 100 * random_.uniform(-1, 1); }

  tests::RandomSource& random_;
  double percent_, unshared_;
  std::array<double, 4> fixed_{}, run_{};
};

struct Counts {
  double covered = 0;      ///< of all intervals
  double false_alarm = 0;  ///< of all comparisons of equal boards
};

/// Three levels; the second board is better by better_w at 120 W, in proportion elsewhere.
Counts simulate(double true_unshared, double better, int times, std::uint64_t seed) {
  tests::RandomSource random{seed};
  const Bench bench;
  const std::array<double, 3> loads{60, 120, 240};
  Counts out;
  for (int n = 0; n < times; ++n) {
    Errors errors{random, bench.percent, true_unshared};
    errors.next_run();
    std::vector<CurvePoint> ours;
    std::vector<CurvePoint> theirs;
    for (const double load_w : loads) ours.push_back(bench.level("1", load_w, load_w / 10, errors.level()));
    errors.next_run();
    for (const double load_w : loads)
      theirs.push_back(bench.level("2", load_w, load_w * (0.1 - better), errors.level()));
    const auto compared =
        *efficiency::compare({run_of("1", "a", ours), run_of("2", "b", theirs), kRated, {}, false});
    bool alarm = false;
    for (const auto& level : compared.levels) {
      const double truth = 1 / (1.1 - better) - 1 / 1.1;
      const bool inside = std::abs(level.efficiency->value() - truth) <= half_width(level);
      out.covered += inside ? 1.0 / (3.0 * times) : 0;
      alarm = alarm || level.decided != Decided::not_resolved;
    }
    out.false_alarm += alarm ? 1.0 / times : 0;
  }
  return out;
}

}  // namespace

// Sums of many rectangular errors are near normal: 95 %. The three levels of one comparison have their
// per-run errors in common: at worst 2000 independent intervals, a standard deviation of 0.5 points; 4 of
// them are allowed (false alarm under 1 in 10 000).
TEST_CASE("intervals of differences cover as often as they say, if the share is the assumed one") {
  const std::uint64_t seed = tests::seed_of_tests();
  INFO("seed " << seed);
  constexpr int kTimes = 2000;
  const Counts right = simulate(0.2, 0.004, kTimes, seed);
  const Counts half = simulate(0.1, 0.004, kTimes, seed + 1);
  const Counts twice = simulate(0.4, 0.004, kTimes, seed + 2);
  const Counts equal = simulate(0.2, 0, kTimes, seed + 3);
  std::cout << "comparison: coverage " << right.covered << ", true unshared share half the assumed "
            << half.covered << ", twice " << twice.covered << "; equal boards called different "
            << equal.false_alarm << "\n";
  CHECK(right.covered > 0.93);
  CHECK(right.covered < 0.975);
  // Phi(1.96 sqrt 2) = 0.9944 and Phi(1.96 / sqrt 2) = 0.834, two-sided.
  CHECK(half.covered == Approx(0.9944).margin(0.01));
  CHECK(twice.covered == Approx(0.834).margin(0.034));
  CHECK(equal.false_alarm < 0.05 + 0.02);
}
