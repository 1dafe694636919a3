#include "analysis/series/statistics.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <limits>
#include <vector>

using namespace loadstair;

TEST_CASE("a compensated sum keeps what plain adding loses") {
  // Neumaier 1974: 1 + 1e100 + 1 - 1e100 = 2.
  series::CompensatedSum sum;
  for (const double term : {1.0, 1e100, 1.0, -1e100}) sum.add(term);
  CHECK(sum.total() == 2);
  // Exact by construction: a thousand halves of the last place of one are 500 of them.
  series::CompensatedSum fine;
  fine.add(1);
  const double half_place = std::numeric_limits<double>::epsilon() / 2;
  for (int i = 0; i < 1000; ++i) fine.add(half_place);
  CHECK(fine.total() == 1 + 500 * std::numeric_limits<double>::epsilon());
  // The remainder holds what one double cannot.
  series::CompensatedSum rest;
  rest.add(1);
  rest.add(1e-20);
  CHECK(rest.total() == 1);
  CHECK(rest.remainder() == 1e-20);
}

TEST_CASE("statistics shift and scale as their definitions do") {
  const std::vector<double> base{3, 1, 4, 1, 5, 9, 2, 6};
  const auto plain = series::statistics(base);
  REQUIRE(plain);
  // Sum 31 of 8; sum of squares 173: closed form.
  CHECK(plain->mean == 31.0 / 8);
  CHECK(plain->standard_deviation == Approx(std::sqrt((173 - 31.0 * 31.0 / 8) / 7)).epsilon(1e-15));
  CHECK(plain->least == 1);
  CHECK(plain->greatest == 9);
  std::vector<double> moved;
  for (const double v : base) moved.push_back(1e6 - 4 * v);
  const auto other = series::statistics(moved);
  REQUIRE(other);
  CHECK(other->mean == 1e6 - 4 * plain->mean);
  CHECK(other->standard_deviation == Approx(4 * plain->standard_deviation).epsilon(1e-15));
  CHECK(other->lag1_autocorrelation == Approx(plain->lag1_autocorrelation).epsilon(1e-14));
}

TEST_CASE("statistics refuse what is not a sample and name the place") {
  CHECK(series::statistics({}).refusal().reason == "no values");
  const std::vector<double> broken{1, 2, std::nan("")};
  CHECK(series::statistics(broken).refusal().place == "value 3");
  const std::vector<double> equal(5, 0.1);
  const auto constant = series::statistics(equal);
  REQUIRE(constant);
  CHECK(constant->mean == 0.1);
  CHECK(constant->standard_deviation == 0);
  CHECK(constant->lag1_autocorrelation == 0);
}

TEST_CASE("correlation of residuals is one for a multiple and zero for a constant") {
  const std::vector<double> a{1, -2, 0.5, 0.5};
  std::vector<double> b;
  for (const double v : a) b.push_back(-3 * v);
  CHECK(series::correlation_of_residuals(a, b) == Approx(-1).epsilon(1e-15));
  CHECK(series::correlation_of_residuals(a, std::vector<double>(4, 0.0)) == 0);
  // Orthogonal by construction.
  CHECK(series::correlation_of_residuals(a, std::vector<double>{0, 0, 1, -1}) == 0);
}
