#include "analysis/efficiency/idle_power.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <limits>
#include <vector>

namespace efficiency = loadstair::efficiency;
namespace estimate = loadstair::estimate;

TEST_CASE("idle power: the value passes through, a meter far down its range is named") {
  const auto source = estimate::make_type_b("offset", "offset", estimate::Distribution::normal);
  const estimate::Estimate power{0.82, source, 0.1};
  const std::vector<efficiency::RangeUse> uses = {
      {"input voltage", 48, 60}, {"input current", -0.017, 10}, {"input power", 0.82, 0}};
  const auto found = efficiency::idle_power(power, uses);
  REQUIRE(found.power);
  CHECK(found.power->value() == 0.82);
  CHECK(found.power->standard_uncertainty() == 0.1);
  REQUIRE(found.remarks.size() == 1);
  CHECK(found.remarks[0].find("input current: read at 0.17 % of its range") == 0);
  // Exactly at the limit there is no remark.
  const std::vector<efficiency::RangeUse> at_limit = {{"input current", 0.5, 10}};
  CHECK(efficiency::idle_power(power, at_limit).remarks.empty());
}

TEST_CASE("idle power: refusals are kept, hostile numbers refused") {
  const double nan = std::numeric_limits<double>::quiet_NaN();
  const auto none = efficiency::idle_power(loadstair::base::Refusal{"A1", "silent"}, {});
  REQUIRE_FALSE(none.power);
  CHECK(none.power.refusal().reason == "silent");
  CHECK_FALSE(efficiency::idle_power(estimate::Estimate{nan}, {}).power);
  CHECK_FALSE(efficiency::idle_power(estimate::Estimate{HUGE_VAL}, {}).power);
  const std::vector<efficiency::RangeUse> hostile = {
      {"a", nan, 1}, {"b", 1, nan}, {"c", 1, -1}, {"d", 0, HUGE_VAL}};
  CHECK(efficiency::idle_power(estimate::Estimate{1}, hostile).remarks.empty());
  const auto reversed = efficiency::idle_power(estimate::Estimate{-1}, {});
  REQUIRE(reversed.remarks.size() == 1);
  CHECK(reversed.remarks[0].find("reversed") != std::string::npos);
}
