#include "analysis/estimate/conditions.h"

#include <catch2/catch.hpp>
#include <cmath>

using namespace loadstair;
using estimate::Conditions;
using estimate::MeterRange;
using estimate::SpecificationConditions;

namespace {

MeterRange meter() {
  return {{"V1", "ac voltage", "300 V"}, 300, 0, estimate::AccuracySpec{0.1, 0.05, 0}};
}

SpecificationConditions all_declared() {
  SpecificationConditions spec;
  spec.reference_low_c = 18;
  spec.reference_high_c = 28;
  spec.reading_percent_per_k = 0.01;
  spec.range_percent_per_k = 0.005;
  spec.most_days = 365;
  spec.least_percent_of_range = 5;
  spec.band_low_hz = 45;
  spec.band_high_hz = 1000;
  spec.crest_factor_limit = 3;
  spec.least_power_factor = 0.5;
  return spec;
}

Conditions quiet() {
  Conditions conditions;
  conditions.ambient_c = 23;
  conditions.days_since_adjustment = 100;
  conditions.frequency_hz = 50;
  conditions.crest_factor = 1.42;
  conditions.power_factor = -0.9;
  return conditions;
}

}  // namespace

TEST_CASE("inside its conditions a specification stays as it is") {
  const auto found = estimate::judge_conditions(230, meter(), all_declared(), quiet());
  CHECK(found.violated.empty());
  CHECK(found.not_checked.empty());
  CHECK(found.allowed_for);
  CHECK(found.fixed_is_common);
  CHECK(found.meter.accuracy->percent_of_reading == 0.1);
  // On the edge it holds.
  auto edge = quiet();
  edge.ambient_c = 28;
  edge.frequency_hz = 1000;
  edge.days_since_adjustment = 365;
  edge.power_factor = 0.5;
  CHECK(estimate::judge_conditions(15, meter(), all_declared(), edge).violated.empty());
}

TEST_CASE("outside the temperature span the limits grow by the declared coefficient, to either side") {
  auto conditions = quiet();
  conditions.ambient_c = 38;
  const auto warm = estimate::judge_conditions(230, meter(), all_declared(), conditions);
  // 10 K x 0.01 %/K of reading and 10 K x 0.005 %/K of range on top.
  CHECK(warm.meter.accuracy->percent_of_reading == Approx(0.2).epsilon(1e-12));
  CHECK(warm.meter.accuracy->percent_of_range == Approx(0.1).epsilon(1e-12));
  REQUIRE(warm.violated.size() == 1);
  CHECK(warm.violated[0].find("10 K outside") != std::string::npos);
  CHECK(warm.allowed_for);
  CHECK_FALSE(warm.fixed_is_common);
  const auto reading = estimate::with_meter_error(230, warm.meter, {"r", "s"});
  REQUIRE(reading);
  CHECK(reading->variance() == Approx((0.46 * 0.46 + 0.3 * 0.3) / 3).epsilon(1e-12));
  conditions.ambient_c = 8;
  CHECK(estimate::judge_conditions(230, meter(), all_declared(), conditions)
            .meter.accuracy->percent_of_reading == Approx(0.2).epsilon(1e-12));
  // Without a coefficient there is only the flag.
  auto bare = all_declared();
  bare.reading_percent_per_k.reset();
  bare.range_percent_per_k.reset();
  const auto flagged = estimate::judge_conditions(230, meter(), bare, conditions);
  CHECK_FALSE(flagged.allowed_for);
  CHECK(flagged.meter.accuracy->percent_of_reading == 0.1);
}

TEST_CASE("every other condition is a flag with its own sentence") {
  const auto only = [](auto change, double reading, const char* word) {
    auto conditions = quiet();
    change(conditions);
    const auto found = estimate::judge_conditions(reading, meter(), all_declared(), conditions);
    INFO(word);
    REQUIRE(found.violated.size() == 1);
    CHECK(found.violated[0].find(word) != std::string::npos);
    CHECK_FALSE(found.allowed_for);
    CHECK(found.meter.accuracy->percent_of_reading == 0.1);
  };
  only([](Conditions& c) { c.days_since_adjustment = 400; }, 230, "400 days ago");
  only([](Conditions&) {}, -10, "3.333 % of the range");
  only([](Conditions& c) { c.frequency_hz = 20; }, 230, "below the band from 45 Hz");
  only([](Conditions& c) { c.frequency_hz = 2000; }, 230, "above the band to 1000 Hz");
  only([](Conditions& c) { c.crest_factor = 3.5; }, 230, "crest factor 3.5");
  only([](Conditions& c) { c.power_factor = -0.3; }, 230, "power factor 0.3");
}

TEST_CASE("what nobody knows is said, what nobody declared is not judged") {
  const auto unknown = estimate::judge_conditions(230, meter(), all_declared(), {});
  CHECK(unknown.violated.empty());
  CHECK(unknown.not_checked.size() == 5);
  const auto undeclared = estimate::judge_conditions(1, meter(), {}, quiet());
  CHECK(undeclared.violated.empty());
  CHECK(undeclared.not_checked.empty());
}
