// Crest factor in a band, in coarse records, and noise beside the RMS.
#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <numbers>
#include <vector>

#include "analysis/waveform/waveform.h"
#include "tests/analysis/random_source.h"

namespace loadstair::waveform {
namespace {

constexpr double kPi = std::numbers::pi;

Waveform one_channel(const std::vector<double>& samples, double interval_s) {
  Waveform waveform;
  waveform.interval_s = interval_s;
  waveform.channels = {{.name = "v", .unit = "V", .values = samples}};
  return waveform;
}

template <class Shape>
std::vector<double> shaped(double cycles, std::size_t samples, Shape shape) {
  std::vector<double> out;
  for (std::size_t k = 0; k < samples; ++k)
    out.push_back(shape(2.0 * kPi * cycles * static_cast<double>(k) / static_cast<double>(samples)));
  return out;
}

double square_wave(double angle) {
  return std::sin(angle) >= 0.0 ? 1.0 : -1.0;
}

/// Peak over RMS of the square wave's Fourier sum to an order, by its closed form on a fine grid.
double fourier_crest(int highest) {
  double peak = 0.0, square = 0.0;
  for (int h = 1; h <= highest; h += 2) square += 0.5 * std::pow(4.0 / (kPi * h), 2.0);
  for (int k = 0; k < 20000; ++k) {
    double sum = 0.0;
    for (int h = 1; h <= highest; h += 2) sum += 4.0 / (kPi * h) * std::sin(h * kPi * k / 20000.0);
    peak = std::max(peak, sum);
  }
  return peak / std::sqrt(square);
}

TEST_CASE("the crest factor in a band is that of the Fourier sum up to the band") {
  for (const double cycles : {10.0, 10.37}) {
    for (const double band_hz : {350.0, 1000.0, 2000.0}) {
      const auto v = shaped(cycles, 40000, square_wave);
      AnalysisSettings settings;
      settings.crest_band_hz = band_hz;
      const auto result = analyse(one_channel(v, 0.02 * cycles / 40000.0), settings);
      REQUIRE(result);
      INFO(cycles << " cycles, band " << band_hz);
      REQUIRE(result->channels[0].crest_factor_in_band);
      const int highest = static_cast<int>(std::floor(band_hz / 50.0 + 1e-9));
      // A jump falls between samples: 1/4000 of a cycle; and the finest grid misses 1.9 % of the highest
      // line.
      CHECK(result->channels[0].crest_factor_in_band->value ==
            Approx(fourier_crest(highest % 2 == 0 ? highest - 1 : highest)).epsilon(0.003));
      CHECK(result->channels[0].crest_band_hz == band_hz);
      CHECK(result->channels[0].crest_factor->value == Approx(1.0).epsilon(0.001));
      CHECK_FALSE(result->channels[0].crest_factor->lower_bound);
    }
  }
}

TEST_CASE("one glitch among ten cycles moves the raw crest factor and not the median of the band") {
  auto v = shaped(10.0, 20000, [](double angle) { return 325.0 * std::sin(angle); });
  v[5300] = 900.0;
  AnalysisSettings settings;
  settings.crest_band_hz = 5000.0;
  const auto result = analyse(one_channel(v, 1e-5), settings);
  REQUIRE(result);
  CHECK(result->channels[0].crest_factor->value > 3.5);
  CHECK(result->channels[0].crest_factor_in_band->value == Approx(std::numbers::sqrt2).epsilon(0.002));
}

TEST_CASE("few steps up to the peak make the crest factor a lower bound that holds") {
  for (const double offset : {0.0, 0.13, 0.37, 0.49}) {
    for (const double amplitude : {4.3, 9.7, 18.2}) {
      const auto v = shaped(10.37, 20000,
                            [&](double angle) { return std::round(amplitude * std::sin(angle) + offset); });
      AnalysisSettings settings;
      settings.crest_band_hz = 10000.0;
      const auto result = analyse(one_channel(v, 1e-5), settings);
      REQUIRE(result);
      INFO(amplitude << " steps, offset " << offset);
      CHECK(result->channels[0].quantisation_step == 1.0);
      for (const auto& crest : {result->channels[0].crest_factor, result->channels[0].crest_factor_in_band}) {
        REQUIRE(crest);
        CHECK(crest->lower_bound);
        // Peak to half a step; the RMS of so coarse a sine is off by a few per cent of a step.
        CHECK(crest->value <= (amplitude + offset) / (amplitude / std::numbers::sqrt2) * 1.01);
        CHECK(crest->value >= (amplitude + offset - 1.1) / std::hypot(amplitude / std::numbers::sqrt2, 0.6));
      }
    }
  }
  // 8 bits over the whole range are 127 steps up to the peak: no bound.
  const auto fine = shaped(10.37, 20000, [](double angle) { return std::round(127.0 * std::sin(angle)); });
  const auto result = analyse(one_channel(fine, 1e-5));
  REQUIRE(result);
  CHECK_FALSE(result->channels[0].crest_factor->lower_bound);
  // Two levels are a switched signal, three as well.
  for (const double width : {0.0, 0.5}) {
    const auto switched = shaped(10.0, 20000, [&](double angle) {
      return std::abs(std::sin(angle)) < width ? 0.0 : square_wave(angle);
    });
    const auto told = analyse(one_channel(switched, 1e-5));
    REQUIRE(told);
    CHECK_FALSE(told->channels[0].crest_factor->lower_bound);
    CHECK(told->channels[0].quantisation_step == 0.0);
  }
}

TEST_CASE("noise and steps stand beside the RMS, and RMS^2 less both is the signal's") {
  const std::uint64_t seed = tests::seed_of_tests();
  INFO("seed " << seed);
  tests::RandomSource random{seed};
  for (const double cycles : {10.0, 10.37, 2.0, 4.6}) {
    const double noise = 3.0, step = 2.5;
    auto v = shaped(cycles, 20000,
                    [](double angle) { return 100.0 * std::sin(angle) + 10.0 * std::cos(3 * angle); });
    for (double& sample : v) sample = step * std::round((sample + noise * random.normal()) / step);
    const auto result = analyse(one_channel(v, 0.02 * cycles / 20000.0));
    REQUIRE(result);
    const ChannelResult& channel = result->channels[0];
    INFO(cycles << " cycles");
    const double whole = std::sqrt(noise * noise + step * step / 12.0);
    CHECK(channel.noise_rms == Approx(whole).epsilon(0.05));
    CHECK(channel.quantisation_step == Approx(step));
    const double square = channel.rms.value * channel.rms.value - channel.noise_rms * channel.noise_rms;
    CHECK(std::sqrt(square) == Approx(std::sqrt(5050.0)).epsilon(0.002));
    CHECK(channel.total_distortion_band_hz == Approx(0.5 / result->interval_s));
    REQUIRE(channel.total_distortion);
    CHECK(*channel.total_distortion ==
          Approx(std::hypot(10.0, whole * std::numbers::sqrt2) / 100.0).epsilon(0.02));
  }
}

TEST_CASE("a smooth record has no steps, however few its samples; printed ones keep theirs") {
  // 200 samples a cycle: neighbours differ by 2 % of the step's size at least, which is no step of a
  // converter.
  const auto smooth =
      shaped(10.0, 2000, [](double angle) { return std::sin(angle) + 1e-4 * std::sin(9 * angle); });
  const auto result = analyse(one_channel(smooth, 1e-4));
  REQUIRE(result);
  CHECK(result->channels[0].quantisation_step == 0.0);
  CHECK(result->channels[0].noise_rms < 1e-9);
  CHECK_FALSE(result->channels[0].harmonics[8].below_floor);
  CHECK(result->channels[0].harmonics[7].below_floor);
  // 8 bits of 10 V printed to three decimals: 0.039 for 0.0390625.
  const auto printed = shaped(10.37, 20000, [](double angle) {
    return std::round(1000.0 * std::round(4.7 * std::sin(angle) / 0.0390625) * 0.0390625) / 1000.0;
  });
  const auto found = analyse(one_channel(printed, 1e-5));
  REQUIRE(found);
  CHECK(found->channels[0].quantisation_step == Approx(0.0390625).epsilon(0.001));
}

}  // namespace
}  // namespace loadstair::waveform
