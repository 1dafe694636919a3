#include "analysis/estimate/tie.h"

#include <array>
#include <catch2/catch.hpp>
#include <cmath>
#include <numbers>

#include "analysis/estimate/coverage.h"
#include "tests/analysis/random_source.h"

using namespace loadstair;
using estimate::Estimate;
using estimate::MeterRange;
using estimate::Occasion;
using estimate::TieLevel;

namespace {

MeterRange meter(const char* name, double percent_of_reading, double percent_of_range) {
  return {
      {name, "dc voltage", "60 V"}, 60, 0, estimate::AccuracySpec{percent_of_reading, percent_of_range, 0}};
}

const MeterRange kA = meter("VA", 0.5, 0.1);
const MeterRange kB = meter("VB", 0.8, 0.2);
const estimate::Shares kNoLevel{0.9, 0.1, 0};

Estimate read(const MeterRange& range, double value, const Occasion& occasion,
              const estimate::Shares& shares = {}) {
  auto out = estimate::with_meter_error(value, range, occasion, shares);
  REQUIRE(out);
  return *std::move(out);
}

Estimate noise(const char* name, double u) {
  return {0, estimate::make_type_a(estimate::key::window("r", name, "noise"), name, 50), u};
}

TieLevel level(double a, double b, const char* name, const char* run, const estimate::Shares& shares = {}) {
  const std::string at{name};
  return {read(kA, a, {run, at + " A"}, shares), read(kB, b, {run, at + " B"}, shares)};
}

}  // namespace

TEST_CASE("a tie finds gain and offset of one meter against another") {
  // B = 1.002 A - 0.03: closed form.
  const auto tie = estimate::tie_check(level(50, 50.07, "high", "r"), level(10, 9.99, "low", "r"));
  REQUIRE(tie);
  CHECK(tie->ratio.value() == Approx(1.002).epsilon(1e-12));
  CHECK(tie->offset.value() == Approx(-0.03).epsilon(1e-9));
  CHECK(tie->gain_difference.value() == Approx(0.002).epsilon(1e-9));
  CHECK(tie->low == 9.99);
  CHECK(tie->high == 50.07);
  CHECK(tie->within_specifications);
  // What was measured is not its own uncertainty: only linearity is left here, of both meters at both levels.
  const auto linearity = [](const MeterRange& range, double value) {
    return 0.1 *
           (std::pow(range.accuracy->percent_of_reading / 100 * value, 2) +
            std::pow(range.accuracy->percent_of_range / 100 * 60, 2)) /
           3;
  };
  const double variance =
      linearity(kB, 50.07) + linearity(kB, 9.99) + 1.002 * 1.002 * (linearity(kA, 50) + linearity(kA, 10));
  CHECK(tie->gain_difference.standard_uncertainty() == Approx(std::sqrt(variance) / 40).epsilon(1e-9));
  // Meters that differ by 5 % are not both within 0.5 and 0.8 %.
  const auto broken = estimate::tie_check(level(50, 52.5, "high", "r"), level(10, 10.5, "low", "r"));
  REQUIRE(broken);
  CHECK_FALSE(broken->within_specifications);
}

TEST_CASE("a tied reading carries A's gain and offset, and none of B's") {
  const auto tie =
      estimate::tie_check(level(10, 9.99, "low", "r", kNoLevel), level(50, 50.07, "high", "r", kNoLevel));
  REQUIRE(tie);
  const Estimate b = read(kB, 30.03, {"r", "step 1"}, kNoLevel);
  const Estimate corrected = estimate::tied(b, *tie);
  CHECK(corrected.value() == Approx(30).epsilon(1e-12));
  // Without linearity it is what A itself would have shown, source for source.
  const Estimate as_a = read(kA, 30, {"r", "step 1"}, kNoLevel);
  CHECK(corrected.variance() == Approx(as_a.variance()).epsilon(1e-9));
  CHECK(estimate::correlation(corrected, as_a) == Approx(1).epsilon(1e-9));
  CHECK(std::abs(estimate::covariance(corrected, b)) < 1e-12);
}

TEST_CASE("in a ratio to A's own reading the gain is gone; offsets differ by what the levels differ") {
  const MeterRange a = meter("VA", 0.5, 0);
  const MeterRange b = meter("VB", 0.8, 0);
  const auto at = [&](double value, const char* name) {
    return TieLevel{read(a, value, {"r", std::string{name} + " A"}),
                    read(b, value, {"r", std::string{name} + " B"})};
  };
  const auto tie = estimate::tie_check(at(10, "low"), at(50, "high"));
  REQUIRE(tie);
  const Estimate in = read(a, 48, {"r", "step, input"});
  const Estimate out = read(b, 12, {"r", "step, output"});
  const double before = (out / in).standard_uncertainty() / 0.25;
  const double after = (estimate::tied(out, *tie) / in).standard_uncertainty() / 0.25;
  CHECK(before == Approx(std::hypot(0.005, 0.008) / std::numbers::sqrt3).epsilon(1e-9));
  // Linearity alone, sqrt(0.1) of each gain: A's and B's own now, and through the tie's weights at 12 V
  // (0.95 on the low level, 0.05 on the high one).
  const double la = 0.005 / std::numbers::sqrt3 * std::sqrt(0.1);
  const double lb = 0.008 / std::numbers::sqrt3 * std::sqrt(0.1);
  const double low = 0.95 * 10 / 12;
  const double high = 0.05 * 50 / 12;
  const double expected = std::sqrt((la * la + lb * lb) * (1 + low * low + high * high));
  CHECK(after == Approx(expected).epsilon(1e-9));
  CHECK(after < 0.5 * before);
}

TEST_CASE("a tie of another run leaves both meters' parts per run") {
  const auto tie_now =
      estimate::tie_check(level(10, 10, "low", "r", kNoLevel), level(50, 50, "high", "r", kNoLevel));
  const auto tie_then =
      estimate::tie_check(level(10, 10, "low", "r0", kNoLevel), level(50, 50, "high", "r0", kNoLevel));
  REQUIRE(tie_now);
  REQUIRE(tie_then);
  const Estimate in = read(kA, 40, {"r", "input"}, kNoLevel);
  const Estimate out = read(kB, 40, {"r", "output"}, kNoLevel);
  CHECK((estimate::tied(out, *tie_now) - in).standard_uncertainty() < 1e-12);
  // Then: A's and B's part per run, each once for the tie's run and once for this one.
  const auto variance = [](const MeterRange& range) {
    return (std::pow(range.accuracy->percent_of_reading / 100 * 40, 2) +
            std::pow(range.accuracy->percent_of_range / 100 * 60, 2)) /
           3;
  };
  CHECK((estimate::tied(out, *tie_then) - in).variance() ==
        Approx(2 * 0.1 * (variance(kA) + variance(kB))).epsilon(1e-9));
}

TEST_CASE("a tie's noise stays, and grows outside its levels") {
  TieLevel low = level(10, 10, "low", "r", kNoLevel);
  TieLevel high = level(50, 50, "high", "r", kNoLevel);
  low.b = low.b + noise("low", 0.001);
  high.b = high.b + noise("high", 0.002);
  const auto tie = estimate::tie_check(low, high);
  REQUIRE(tie);
  CHECK(tie->gain_difference.standard_uncertainty() == Approx(std::hypot(0.001, 0.002) / 40).epsilon(1e-9));
  const auto noise_at = [&](double volts) {
    const Estimate difference =
        estimate::tied(read(kB, volts, {"r", "o"}, kNoLevel), *tie) - read(kA, volts, {"r", "i"}, kNoLevel);
    return difference.standard_uncertainty();
  };
  CHECK(noise_at(10) == Approx(0.001).epsilon(1e-9));
  CHECK(noise_at(30) == Approx(std::hypot(0.001, 0.002) / 2).epsilon(1e-9));
  CHECK(noise_at(90) == Approx(std::hypot(0.001, 2 * 0.002)).epsilon(1e-9));
}

TEST_CASE("a level's readings are its windows' Type A with each meter's error on top") {
  const TieLevel windows{Estimate{10} + noise("a", 0.001), Estimate{10.02} + noise("b", 0.002)};
  const auto found = estimate::tie_level(windows, kA, kB, {"r", "tie low"});
  REQUIRE(found);
  CHECK(found->a.value() == 10);
  CHECK(found->b.value() == 10.02);
  const double error = read(kB, 10.02, {"r", "tie low"}).variance();
  CHECK(found->b.variance() == Approx(error + 0.002 * 0.002).epsilon(1e-12));
  MeterRange undeclared = kB;
  undeclared.accuracy.reset();
  CHECK_FALSE(estimate::tie_level(windows, kA, undeclared, {"r", "tie low"}));
}

TEST_CASE("levels too near to each other, and foreign numbers, are refused") {
  CHECK_FALSE(estimate::tie_check(level(50, 50, "low", "r"), level(50, 50, "high", "r")));
  CHECK_FALSE(estimate::tie_check(level(50, 50, "low", "r"), level(50.1, 50.2, "high", "r")));
  TieLevel bad = level(50, 50, "high", "r");
  bad.a = Estimate{std::nan("")};
  CHECK_FALSE(estimate::tie_check(level(10, 10, "low", "r"), bad));
}

TEST_CASE("by simulation the interval of a tied ratio holds the truth") {
  // Meters drawn here, within their limits: gain and offset for good, a linearity error of its own at every
  // reading. 2000 benches; at least 93 % (five deviations below 95 %: 92.6 %).
  tests::RandomSource random{tests::seed_of_tests()};
  const auto limit = [&](double half_width, double share) {
    return random.uniform(-half_width, half_width) * std::sqrt(share);
  };
  int held = 0;
  double sum_of_u = 0;
  double sum_untied = 0;
  for (int bench = 0; bench < 2000; ++bench) {
    struct Meter {
      double gain = 0;
      double offset = 0;
      double percent_reading = 0;
      double percent_range = 0;
    };
    const auto drawn = [&](const MeterRange& range) {
      const double gain = range.accuracy->percent_of_reading / 100;
      const double offset = range.accuracy->percent_of_range / 100 * 60;
      return Meter{limit(gain, 0.9), limit(offset, 0.9), gain, offset};
    };
    const Meter a = drawn(kA);
    const Meter b = drawn(kB);
    const auto shown = [&](const Meter& m, double truth) {
      return truth * (1 + m.gain) + m.offset + limit(m.percent_reading * truth, 0.1) +
             limit(m.percent_range, 0.1);
    };
    const auto tie = estimate::tie_check(level(shown(a, 12), shown(b, 12), "low", "r"),
                                         level(shown(a, 48), shown(b, 48), "high", "r"));
    REQUIRE(tie);
    const Estimate in = read(kA, shown(a, 40), {"r", "input"});
    const Estimate out = read(kB, shown(b, 36), {"r", "output"});
    const auto interval = estimate::coverage(estimate::tied(out, *tie) / in);
    if (interval.low <= 0.9 && 0.9 <= interval.high) ++held;
    sum_of_u += interval.expanded;
    sum_untied += estimate::coverage(out / in).expanded;
  }
  CHECK(held >= 1860);
  CHECK(sum_of_u < 0.6 * sum_untied);
}

TEST_CASE("a measured zero takes the offset's place") {
  MeterRange range = meter("VA", 0.5, 0.1);
  range.digit = 0.01;
  const Occasion occasion{"r", "s"};
  const Estimate reading = read(range, 30, occasion, kNoLevel);
  const estimate::ZeroCheck zero{Estimate{0.04} + noise("before", 0.002),
                                 Estimate{0.06} + noise("after", 0.002)};
  const auto found = estimate::zero_corrected(reading, zero, range, occasion);
  REQUIRE(found);
  CHECK(found->value() == Approx(29.95).epsilon(1e-12));
  // Gain 0.15 V and the change's half 0.01 V rectangular, noise of a mean of two, resolution of reading and
  // zeros (the specification has no digits, so the reading's own was there before).
  const double expected = 0.15 * 0.15 / 3 + 0.01 * 0.01 / 3 + 0.002 * 0.002 / 2 + 2 * 0.01 * 0.01 / 12;
  CHECK(found->variance() == Approx(expected).epsilon(1e-9));
  // Where digits stood for the resolution they went with the offset, and the resolution comes back.
  range.accuracy->digits = 2;
  const auto with_digits =
      estimate::zero_corrected(read(range, 30, occasion, kNoLevel), zero, range, occasion);
  REQUIRE(with_digits);
  CHECK(with_digits->variance() == Approx(expected).epsilon(1e-9));
  // Two readings of one run share the zero's change.
  const Occasion later{"r", "t"};
  const auto second = estimate::zero_corrected(read(range, 10, later, {0, 0, 1}), zero, range, later);
  REQUIRE(second);
  CHECK(estimate::covariance(*found, *second) ==
        Approx(0.01 * 0.01 / 3 + 0.002 * 0.002 / 2 + 0.01 * 0.01 / 12).epsilon(1e-9));
  CHECK_FALSE(estimate::zero_corrected(reading, {Estimate{std::nan("")}, Estimate{0}}, range, occasion));
}
