// Any trace gives a verdict with a reason and ordered, finite intervals.
#include <catch2/catch.hpp>
#include <cmath>
#include <cstdlib>
#include <random>
#include <vector>

#include "analysis/base/number.h"
#include "analysis/settling/settling.h"

namespace loadstair::settling {
namespace {

TEST_CASE("random traces give a verdict with a reason") {
  const char* text = std::getenv("LOADSTAIR_SEED");
  const auto seed = static_cast<std::uint64_t>(text == nullptr ? 6 : base::parse_integer(text).value_or(6));
  std::mt19937_64 random{seed};
  const auto unit = [&] { return static_cast<double>(random() >> 11) * 0x1p-53; };
  for (int run = 0; run < 200; ++run) {
    INFO("seed " << seed << ", trace " << run);
    const auto samples = static_cast<std::size_t>(std::pow(10.0, 3.0 * unit()));
    const double tau = std::pow(10.0, 4.0 * unit() - 1.0);
    const double rise = unit() < 0.1 ? 0.0 : 100.0 * (unit() - 0.3);
    const double noise = unit() < 0.3 ? 0.0 : unit();
    const double resolution = unit() < 0.3 ? 0.1 : 0.0;
    std::vector<double> time_s, value, ambient;
    double t = 0.0;
    for (std::size_t k = 0; k < samples; ++k) {
      t += (unit() < 0.05 ? std::pow(10.0, 2.0 * unit()) : 1.0) * (0.5 + unit());
      double reading = 50.0 - rise * std::exp(-t / tau) + noise * (unit() - 0.5);
      if (run % 3 == 0 && unit() < 0.01) reading += 20.0;
      if (resolution > 0.0) reading = resolution * std::round(reading / resolution);
      time_s.push_back(t);
      value.push_back(reading);
      if (run % 4 == 0) ambient.push_back(20.0 + 0.01 * t);
    }
    ThermalCriterion criterion;
    criterion.rate = {0.5 + unit(), 1.0 + 300.0 * unit(), 1 + run % 3, run % 2 == 0 ? 0.0 : 100.0 * unit(),
                      run % 5 == 0};
    if (run % 7 != 0)
      criterion.prediction =
          PredictionCriterion{0.1 + unit(), run % 2 == 0 ? 0.0 : 1000.0 * unit(), run % 3 != 0};
    const auto verdict = settled_thermally({time_s, value}, ambient, criterion);
    REQUIRE(verdict);
    CHECK_FALSE(verdict->why.empty());
    CHECK(verdict->settled == (verdict->by != SettledBy::nothing));
    if (verdict->wait_s) CHECK((std::isfinite(*verdict->wait_s) && *verdict->wait_s >= 0.0));
    if (verdict->end) {
      CHECK(std::isfinite(verdict->end->low));
      CHECK(std::isfinite(verdict->end->high));
      CHECK(verdict->end->low <= verdict->end->value);
      CHECK(verdict->end->value <= verdict->end->high);
    }
    const auto slope = settled_by_slope({time_s, value}, {1.0 + 20.0 * unit(), 0.01 + unit(), 5});
    REQUIRE(slope);
    CHECK_FALSE(slope->why.empty());
  }
}

}  // namespace
}  // namespace loadstair::settling
