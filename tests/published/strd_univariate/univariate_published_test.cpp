// NIST StRD, univariate: certified mean, standard deviation and lag-1 autocorrelation.
#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <limits>

#include "analysis/series/statistics.h"
#include "published/table.h"

using namespace loadstair;

namespace {

/// NumAcc2 to 4 by their published rule: one value, then 500 times the pair around it.
std::vector<double> pairs(double first, double low, double high) {
  std::vector<double> out{first};
  for (int i = 0; i < 500; ++i) {
    out.push_back(low);
    out.push_back(high);
  }
  return out;
}

std::vector<double> data_of(const std::string& name) {
  if (name == "NumAcc2") return pairs(1.2, 1.1, 1.3);
  if (name == "NumAcc3") return pairs(1000000.2, 1000000.1, 1000000.3);
  if (name == "NumAcc4") return pairs(10000000.2, 10000000.1, 10000000.3);
  std::vector<double> out;
  if (name == "PiDigits") {
    const auto rows = published::read_table("strd_univariate/pi_digits.csv");
    for (const char digit : rows.front().at("digits")) out.push_back(digit - '0');
    return out;
  }
  static const auto rows = published::read_table("strd_univariate/values.csv");
  for (const auto& row : rows) {
    if (row.at("dataset") == name) out.push_back(published::number(row, "value"));
  }
  return out;
}

/// Half a unit of the last of fifteen printed digits.
double half_last_digit(double certified) {
  return certified == 0 ? 0 : 0.5 * std::pow(10, std::floor(std::log10(std::abs(certified))) - 14);
}

}  // namespace

TEST_CASE("StRD univariate sets come out to every digit that double-precision data permit") {
  for (const auto& row : published::read_table("strd_univariate/certified.csv")) {
    const std::string& name = row.at("dataset");
    INFO(name);
    const auto data = data_of(name);
    REQUIRE(data.size() == static_cast<std::size_t>(published::number(row, "n")));
    const auto found = series::statistics(data);
    REQUIRE(found);

    // Decimal data lose up to half a unit in the last binary place when they are stored. That moves the mean
    // by at most as much, the deviation by at most as much (Cauchy-Schwarz, with sqrt(n/(n-1)) taken as 2),
    // and the lag-1 autocorrelation by at most four times that over the deviation. Then a few roundings of
    // the result.
    const double epsilon = std::numeric_limits<double>::epsilon();
    const double greatest = std::max(std::abs(found->least), std::abs(found->greatest));
    const bool whole = std::all_of(data.begin(), data.end(), [](double v) { return v == std::floor(v); });
    const double storing = whole ? 0 : greatest * epsilon / 2;
    const double mean = published::number(row, "mean");
    const double deviation = published::number(row, "standard_deviation");
    const double lag1 = published::number(row, "lag1");
    CHECK(std::abs(found->mean - mean) <= storing + half_last_digit(mean) + 2 * epsilon * std::abs(mean));
    CHECK(std::abs(found->standard_deviation - deviation) <=
          2 * storing + half_last_digit(deviation) + 4 * epsilon * deviation);
    CHECK(std::abs(found->lag1_autocorrelation - lag1) <=
          4 * storing / deviation + half_last_digit(lag1) + 8 * epsilon);
  }
}
