#include "drivers/instrument/stuck.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <random>

// Thresholds are common practice, no source; these tests state what must and must not be called stuck.

namespace {

using loadstair::instrument::StuckWatch;

constexpr std::int64_t kConversionNs = 100'000'000;

/// Roughly normal, from our own arithmetic: the sum of twelve uniform draws.
double noise(std::mt19937_64& engine) {
  double sum = -6.0;
  for (int i = 0; i < 12; ++i) sum += static_cast<double>(engine() >> 11) * 0x1p-53;
  return sum;
}

double rounded(double value, double digit) {
  return std::round(value / digit) * digit;
}

struct Meter {
  std::mt19937_64 engine{20260917};
  StuckWatch watch{kConversionNs};
  std::int64_t t_ns = 0;
  int stuck = 0;

  void show(double value) {
    t_ns += kConversionNs;
    stuck += watch.observe(value, t_ns) ? 1 : 0;
  }
};

}  // namespace

TEST_CASE("a meter that was restless and then repeats itself for long is stuck, until it moves again") {
  Meter meter;
  for (int i = 0; i < 200; ++i) meter.show(rounded(385.0 + 0.02 * noise(meter.engine), 0.01));
  CHECK(meter.stuck == 0);
  for (int i = 0; i < 200; ++i) meter.show(385.0);
  CHECK(meter.stuck > 50);
  const int before = meter.stuck;
  for (int i = 0; i < 20; ++i) meter.show(rounded(385.0 + 0.02 * noise(meter.engine), 0.01));
  CHECK(meter.stuck == before);
}

TEST_CASE(
    "a meter too coarse for its noise is not stuck, nor one at rest at zero, nor a drift that comes to its "
    "end") {
  Meter coarse;
  for (int i = 0; i < 2000; ++i) coarse.show(rounded(385.0 + 0.1 * noise(coarse.engine), 1.0));
  CHECK(coarse.stuck == 0);

  Meter switched_off;
  for (int i = 0; i < 200; ++i) switched_off.show(rounded(385.0 + 0.02 * noise(switched_off.engine), 0.01));
  for (int i = 0; i < 2000; ++i) switched_off.show(0.0);
  CHECK(switched_off.stuck == 0);

  Meter heatsink;
  for (int i = 0; i < 5000; ++i) heatsink.show(rounded(60.0 - 35.0 * std::exp(-i / 600.0), 0.1));
  CHECK(heatsink.stuck == 0);
}

TEST_CASE("noise of about a count does not make a healthy meter stuck in a million conversions") {
  Meter meter;
  for (int i = 0; i < 1'000'000; ++i) meter.show(rounded(385.0 + 0.007 * noise(meter.engine), 0.01));
  CHECK(meter.stuck == 0);
}
