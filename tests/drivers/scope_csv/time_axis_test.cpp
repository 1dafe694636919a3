#include "drivers/scope_csv/time_axis.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <vector>

#include "analysis/base/number.h"

using namespace loadstair;
using namespace loadstair::scope_csv;

namespace {

/// Times as a scope prints them: rounded to `decimals` places and read back.
std::vector<double> printed_times(std::size_t rows, double interval_s, int decimals, double start_s = 0.0) {
  std::vector<double> times;
  for (std::size_t k = 0; k < rows; ++k) {
    const double exact = start_s + static_cast<double>(k) * interval_s;
    times.push_back(base::parse_number(base::print_fixed(exact, decimals)).value());
  }
  return times;
}

}  // namespace

TEST_CASE("times rounded when printed are uniform, and the interval comes from the first and the last") {
  // 3.2 us printed to the microsecond: 0, 3, 6, 10, 13 ... us.
  const auto times = printed_times(1001, 3.2e-6, 6);
  const auto check = check_times(times, 4);
  REQUIRE_FALSE(check.fault);
  CHECK(check.grid.resolution_s == Approx(1e-6));
  CHECK(check.grid.interval_s == Approx(3.2e-6).epsilon(1e-12));
  CHECK(check.grid.largest_deviation_s <= 0.5e-6 * 1.000001);
}

TEST_CASE("repeated times are tolerated where rounding explains them") {
  // 0.3 us printed to the microsecond: 0, 0, 1, 1, 1, 2, 2 ... us.
  const auto times = printed_times(1001, 0.3e-6, 6);
  REQUIRE(times[0] == times[1]);
  const auto check = check_times(times, 3);
  REQUIRE_FALSE(check.fault);
  CHECK(check.grid.interval_s == Approx(0.3e-6).epsilon(1e-12));
  // Twice the rows at a stretch with the same time are no rounding.
  auto stuck = times;
  for (std::size_t k = 500; k < 510; ++k) stuck[k] = stuck[500];
  CHECK(check_times(stuck, 3).fault);
}

TEST_CASE("one printed digit off the grid passes, more is refused with its row") {
  auto times = printed_times(201, 100e-6, 6);
  times[70] += 1e-6;
  CHECK_FALSE(check_times(times, 5).fault);
  times[70] += 4e-6;
  const auto check = check_times(times, 5);
  REQUIRE(check.fault);
  CHECK(check.fault->row == 70);
}

TEST_CASE("a gap is found at its row, also where rounding would hide one row") {
  auto times = printed_times(201, 100e-6, 6);
  times.erase(times.begin() + 120);
  REQUIRE(check_times(times, 5).fault);
  CHECK(check_times(times, 5).fault->row == 120);
  // The interval is the last printed digit itself.
  auto coarse = printed_times(201, 100e-6, 4);
  REQUIRE_FALSE(check_times(coarse, 3).fault);
  coarse.erase(coarse.begin() + 120);
  REQUIRE(check_times(coarse, 3).fault);
  CHECK(check_times(coarse, 3).fault->row == 120);
}

TEST_CASE("a second record and a constant time are refused") {
  auto times = printed_times(50, 1e-3, 3);
  const auto again = printed_times(50, 1e-3, 3);
  times.insert(times.end(), again.begin(), again.end());
  const auto check = check_times(times, 2);
  REQUIRE(check.fault);
  CHECK(check.fault->row == 50);
  const std::vector<double> constant(20, 0.5);
  REQUIRE(check_times(constant, 1).fault);
  CHECK(check_times(constant, 1).fault->row == 1);
  std::vector<double> falling;
  for (int k = 0; k < 20; ++k) falling.push_back(-1e-3 * k);
  CHECK(check_times(falling, 2).fault);
}

TEST_CASE("a rate that drifts within the record is refused") {
  std::vector<double> times;
  for (int k = 0; k < 2000; ++k) times.push_back(1e-4 * k * (1.0 + 1e-5 * k));
  CHECK(check_times(times, 12).fault);
}

TEST_CASE("times before the trigger keep their resolution") {
  const auto times = printed_times(2001, 10e-6, 5, -0.01);
  const auto check = check_times(times, 4);
  REQUIRE_FALSE(check.fault);
  CHECK(check.grid.start_s == -0.01);
  CHECK(check.grid.resolution_s == Approx(1e-5));
}
