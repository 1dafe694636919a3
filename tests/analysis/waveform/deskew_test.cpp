// The delay between two probes on one resistive signal.
#include "analysis/waveform/deskew.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <numbers>
#include <vector>

#include "tests/analysis/random_source.h"

namespace loadstair::waveform {
namespace {

using Catch::Matchers::Contains;

constexpr double kPi = std::numbers::pi;

struct Record {
  std::vector<double> v, i;
  double interval_s = 1e-5;
};

/// A rectified-looking signal of six lines into a resistor; the current comes late. lag_rad: of a load that
/// is none.
Record record(double frequency_hz, double delay_s, double noise, std::uint64_t seed, double lag_rad = 0.0,
              std::size_t samples = 22000) {
  tests::RandomSource random{seed};
  Record out;
  const double amplitude[] = {100.0, 0.0, 30.0, 0.0, 15.0, 0.0, 8.0};
  for (std::size_t k = 0; k < samples; ++k) {
    double v = 0.0, i = 0.0;
    for (int h = 1; h <= 7; ++h) {
      const double omega = 2.0 * kPi * frequency_hz * h;
      const double t = out.interval_s * static_cast<double>(k);
      v += amplitude[h - 1] * std::cos(omega * t + 0.2 * h);
      i += 0.05 * amplitude[h - 1] * std::cos(omega * (t - delay_s) + 0.2 * h - (h == 1 ? lag_rad : 0.0));
    }
    out.v.push_back(v + 100.0 * noise * random.normal());
    out.i.push_back(i + 5.0 * noise * random.normal());
  }
  return out;
}

Waveform waveform_of(const Record& record) {
  Waveform waveform;
  waveform.interval_s = record.interval_s;
  waveform.channels = {{.name = "v", .unit = "V", .values = record.v},
                       {.name = "i", .unit = "A", .values = record.i}};
  waveform.voltage = 0;
  waveform.current = 1;
  return waveform;
}

TEST_CASE("the delay of a noiseless record is the one it was made with, either sign, on and off the grid") {
  for (const double frequency_hz : {50.0, 49.3, 61.7}) {
    for (const double delay_s : {0.0, 130e-9, -2.5e-6, 41e-6}) {
      const Record made = record(frequency_hz, delay_s, 0.0, 1);
      const auto found = measure_deskew(waveform_of(made));
      INFO(frequency_hz << " Hz, " << delay_s << " s");
      REQUIRE(found);
      CHECK(std::abs(found->delay_s - delay_s) < 1e-9);
      CHECK(found->orders.size() == 4);
    }
  }
}

TEST_CASE("the interval of the delay holds the true one in 95 of 100 noisy records") {
  const std::uint64_t seed = tests::seed_of_tests();
  INFO("seed " << seed);
  constexpr int kRecords = 300;
  int held = 0;
  for (int k = 0; k < kRecords; ++k) {
    const Record made = record(50.3, 3e-7, 0.01, seed * 1000 + static_cast<std::uint64_t>(k), 0.0, 10000);
    const auto found = measure_deskew(waveform_of(made));
    REQUIRE(found);
    held += std::abs(found->delay_s - 3e-7) <= found->half_width_s ? 1 : 0;
  }
  // Binomial: 285 +- 3.8; four of that. Orders that disagree by chance only widen it.
  CHECK(held >= 270);
  CHECK(held < 300);
}

TEST_CASE("a load with inductance shows as orders that disagree, a reversed probe as such") {
  const Record inductive = record(50.0, 0.0, 0.001, 3, 0.01);
  const auto found = measure_deskew(waveform_of(inductive));
  REQUIRE(found);
  REQUIRE(found->remarks.size() == 1);
  CHECK_THAT(found->remarks[0], Contains("disagrees with one delay"));
  // 10 mrad at 50 Hz are 31.8 us; the interval reaches over the disagreement.
  CHECK(found->half_width_s > 0.5 * std::abs(found->delay_s - 0.01 / (2.0 * kPi * 50.0)));
  Record reversed = record(50.0, 0.0, 0.001, 3);
  for (double& sample : reversed.i) sample = -sample;
  CHECK_THAT(measure_deskew(waveform_of(reversed)).refusal().reason, Contains("opposite sign"));
  const Record far = record(50.0, 0.0, 0.001, 3, 1.0);
  CHECK_THAT(measure_deskew(waveform_of(far)).refusal().reason, Contains("not one resistive signal"));
  const Record few = record(50.0, 0.0, 0.001, 3, 0.0, 6000);
  CHECK_THAT(measure_deskew(waveform_of(few)).refusal().reason, Contains("record 5 or more"));
  Waveform unnamed = waveform_of(few);
  unnamed.current.reset();
  CHECK_FALSE(measure_deskew(unnamed));
}

TEST_CASE("a delay that is declared already is taken out, and what is left is found") {
  const Record made = record(50.0, 5e-6, 0.0, 1);
  Waveform waveform = waveform_of(made);
  waveform.channels[1].delay_s = 4e-6;
  CHECK(measure_deskew(waveform)->delay_s == Approx(1e-6).margin(1e-9));
}

}  // namespace
}  // namespace loadstair::waveform
