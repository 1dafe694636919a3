#include "analysis/efficiency/regulation.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <limits>
#include <vector>

#include "analysis/estimate/coverage.h"
#include "analysis/estimate/meter.h"

namespace efficiency = loadstair::efficiency;
namespace estimate = loadstair::estimate;

namespace {

/// One voltmeter on one range, read at each level; its gain and offset last, nothing per level.
estimate::Estimate shown(double value, const std::string& level, double gain_percent) {
  const estimate::MeterRange meter{
      {"V1", "dc voltage", "60 V"}, 60, 0, estimate::AccuracySpec{gain_percent, 0.1, 0}};
  return estimate::with_meter_error(value, meter, {"run", level}, {1, 0, 0}).value();
}

}  // namespace

TEST_CASE("load regulation: signed, over nominal, and a gain counts on the difference only") {
  const std::vector<efficiency::RegulationPoint> points = {{"60 W", 60, shown(11.88, "60 W", 1)},
                                                           {"10 W", 10, shown(12.12, "10 W", 1)},
                                                           {"30 W", 30, shown(12.03, "30 W", 1)}};
  const auto found = efficiency::load_regulation(points, 12);
  REQUIRE(found);
  CHECK(found->value.value() == Approx(0.02).epsilon(1e-12));
  CHECK(found->least == "10 W");
  CHECK(found->greatest == "60 W");
  CHECK(found->widest == Approx(0.02).epsilon(1e-12));
  // Closed form: 1 % of the difference of 0.24 V, rectangular, over 12 V; the offset cancels.
  CHECK(found->value.standard_uncertainty() == Approx(0.01 * 0.24 / std::sqrt(3.0) / 12).epsilon(1e-9));
}

TEST_CASE("line regulation: from the lowest to the highest input voltage") {
  const std::vector<efficiency::RegulationPoint> points = {{"low", 36, estimate::Estimate{11.97}},
                                                           {"high", 60, estimate::Estimate{12.03}}};
  const auto found = efficiency::line_regulation(points, 12);
  REQUIRE(found);
  CHECK(found->value.value() == Approx(0.005).epsilon(1e-12));
  CHECK(found->from == 36);
  CHECK(found->to == 60);
}

TEST_CASE("a voltage that goes up and comes back: the widest difference is kept") {
  const std::vector<efficiency::RegulationPoint> points = {{"a", 10, estimate::Estimate{12}},
                                                           {"b", 20, estimate::Estimate{12.6}},
                                                           {"c", 30, estimate::Estimate{12}}};
  const auto found = efficiency::load_regulation(points, 12);
  REQUIRE(found);
  CHECK(found->value.value() == 0);
  CHECK(found->widest == Approx(0.05).epsilon(1e-12));
}

TEST_CASE("regulation is refused where there is none, and is never NaN") {
  const double nan = std::numeric_limits<double>::quiet_NaN();
  const double huge = std::numeric_limits<double>::max();
  const estimate::Estimate twelve{12};
  CHECK_FALSE(efficiency::load_regulation({}, 12));
  const std::vector<efficiency::RegulationPoint> one = {{"a", 10, twelve}};
  CHECK(efficiency::load_regulation(one, 12).refusal().reason ==
        "fewer than two different loads were measured");
  const std::vector<efficiency::RegulationPoint> same = {{"a", 48, twelve}, {"b", 48.1, twelve}};
  CHECK(efficiency::line_regulation(same, 12).refusal().reason ==
        "fewer than two different input voltages were measured");
  const std::vector<efficiency::RegulationPoint> two = {{"a", 10, twelve}, {"b", 20, twelve}};
  CHECK(efficiency::load_regulation(two, 12));
  for (const double nominal : {0.0, -12.0, nan, HUGE_VAL})
    CHECK_FALSE(efficiency::load_regulation(two, nominal));
  const std::vector<efficiency::RegulationPoint> no_number = {{"a", nan, twelve}, {"b", 20, twelve}};
  CHECK_FALSE(efficiency::load_regulation(no_number, 12));
  const std::vector<efficiency::RegulationPoint> no_voltage = {{"a", 1, estimate::Estimate{nan}},
                                                               {"b", 20, twelve}};
  CHECK_FALSE(efficiency::load_regulation(no_voltage, 12));
  const std::vector<efficiency::RegulationPoint> large = {{"a", 1, estimate::Estimate{huge}},
                                                          {"b", 20, estimate::Estimate{-huge}}};
  CHECK_FALSE(efficiency::load_regulation(large, 12));
}
