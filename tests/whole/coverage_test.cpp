#include "whole/coverage.h"

#include <catch2/catch.hpp>

using namespace loadstair;

// 95 % intervals over independent benches: with 200 of them and a true coverage of 95 %, fewer than 91 % hold
// with a probability of 1 % (binomial distribution). The full program is tests/whole/coverage_main.cpp.
TEST_CASE("the interval of the efficiency holds the truth as often as it says, and is not inflated") {
  const auto points = whole::cover(whole::sample_hookup(), whole::sample_stair(), 1, 200);
  const auto summary = whole::summarise(points);
  for (const auto& point : points) {
    if (!point.holds())
      UNSCOPED_INFO("seed " << point.seed << ", " << point.label << ": true " << point.truth << ", "
                            << point.low << " to " << point.high);
  }
  CHECK(summary.without == 0);
  CHECK(summary.share >= 0.91);
  CHECK(summary.median_width_ratio >= 0.95);
  CHECK(summary.median_width_ratio <= 1.4);
}
