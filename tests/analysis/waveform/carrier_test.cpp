// Carrier groups of naturally sampled PWM whose carrier is no whole multiple of the fundamental.
#include "analysis/waveform/carrier.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <map>
#include <numbers>
#include <vector>

#include "tests/analysis/random_source.h"

namespace loadstair::waveform {
namespace {

using Catch::Matchers::Contains;

constexpr double kPi = std::numbers::pi;

struct Given {
  double frequency_hz, amplitude, phase_rad;
};

std::vector<double> sum_of(const std::vector<Given>& lines, double interval_s, std::size_t samples) {
  std::vector<double> out(samples, 0.0);
  for (const Given& line : lines) {
    for (std::size_t k = 0; k < samples; ++k) {
      out[k] += line.amplitude *
                std::cos(2.0 * kPi * std::fmod(line.frequency_hz * interval_s * static_cast<double>(k), 1.0) +
                         line.phase_rad);
    }
  }
  return out;
}

Waveform one_channel(const std::vector<double>& samples, double interval_s) {
  Waveform waveform;
  waveform.interval_s = interval_s;
  waveform.channels = {{.name = "v", .unit = "V", .values = samples}};
  return waveform;
}

/// Lines of two-level PWM by the double Fourier series: v = M cos y + sum 4/(pi m) J_n(m pi M/2) sin((m+n)
/// pi/2) cos(m x + n y). Bennett 1933, Black 1953; Holmes and Lipo 2003. J_n is the C++ library's.
std::vector<Given> two_level(double modulation, double f0, double fc, int multiples, int sidebands) {
  std::vector<Given> out{{f0, modulation, 0.0}};
  for (int m = 1; m <= multiples; ++m) {
    for (int n = -sidebands; n <= sidebands; ++n) {
      if ((m + n) % 2 == 0) continue;
      const double bessel =
          std::cyl_bessel_j(std::abs(n), m * kPi * modulation / 2.0) * (n < 0 && n % 2 != 0 ? -1.0 : 1.0);
      const double amplitude = 4.0 / (kPi * m) * bessel * std::sin((m + n) * kPi / 2.0);
      out.push_back({m * fc + n * f0, amplitude, 0.0});
    }
  }
  return out;
}

TEST_CASE("carrier groups of an asynchronous carrier are those of the Bessel series") {
  // Off every grid: 50.03 Hz, carrier 20 kHz plus a crystal's error that the search has to find.
  const double f0 = 50.03, fc = 20001.7, interval_s = 2e-6;
  const auto lines = two_level(0.8, f0, fc, 4, 9);
  tests::RandomSource random{tests::seed_of_tests()};
  auto v = sum_of(lines, interval_s, 120000);  // 12 cycles
  for (double& sample : v) sample += 0.01 * random.normal();
  AnalysisSettings settings;
  settings.fundamental_hz = 50.0;
  CarrierSettings carrier;
  carrier.carrier_hz = 20000.0;
  const auto groups = carrier_groups(one_channel(v, interval_s), 0, carrier, settings);
  REQUIRE(groups);
  CHECK(groups->carrier_hz == Approx(fc).margin(0.05));
  CHECK_FALSE(groups->synchronous);
  REQUIRE(groups->groups.size() == 4);
  std::map<std::pair<int, int>, double> wanted;
  for (int m = 1; m <= 4; ++m) {
    for (int n = -8; n <= 8; ++n) {
      for (const Given& line : lines) {
        if (std::abs(line.frequency_hz - m * fc - n * f0) < 1e-6) wanted[{m, n}] = std::abs(line.amplitude);
      }
    }
  }
  int compared = 0;
  for (const CarrierGroup& group : groups->groups) {
    for (const CarrierLine& line : group.lines) {
      const double amplitude = wanted[{group.multiple, line.sideband}];
      INFO("m " << group.multiple << ", n " << line.sideband);
      // 0.5 % of lines above 0.02; smaller ones to what the noise of 0.01 RMS does, 1.42 sqrt(2/N) each.
      const double noise = 4.0 * 1.4162 * 0.01 * 2.0 / std::sqrt(120000.0);
      CHECK(std::abs(line.line.rms * std::numbers::sqrt2 - amplitude) < 0.005 * amplitude + noise);
      if (amplitude > 0.02) {
        ++compared;
        CHECK(std::abs(line.line.rms * std::numbers::sqrt2 / amplitude - 1.0) < 0.005);
        CHECK_FALSE(line.line.below_floor);
      }
    }
  }
  CHECK(compared >= 18);
}

TEST_CASE("lines are found on and off the grid of whole cycles, or said to be out of reach") {
  const double interval_s = 1e-5;
  const std::vector<Given> lines = {{50.0, 325.0, 0.3}, {1234.0, 4.0, 1.0}, {2000.0, 3.0, -2.0}};
  const auto v = sum_of(lines, interval_s, 40000);
  const std::vector<double> at = {1234.0, 2000.0, 3000.0};
  const auto found = lines_at(one_channel(v, interval_s), 0, at);
  REQUIRE(found);
  CHECK((*found)[0].rms == Approx(4.0 / std::numbers::sqrt2).epsilon(1e-4));
  CHECK((*found)[0].phase_deg == Approx(1.0 * 180.0 / kPi).margin(0.02));
  // The line off the grid leaks into one on it that is read without a window; alone it is exact.
  CHECK((*found)[1].rms == Approx(3.0 / std::numbers::sqrt2).epsilon(1e-4));
  const auto alone = sum_of({lines[0], lines[2]}, interval_s, 40000);
  const auto exact = lines_at(one_channel(alone, interval_s), 0, at);
  REQUIRE(exact);
  CHECK((*exact)[1].rms == Approx(3.0 / std::numbers::sqrt2).epsilon(1e-9));
  CHECK((*exact)[1].phase_deg == Approx(-2.0 * 180.0 / kPi).margin(1e-6));
  CHECK((*found)[2].rms < 1e-3);
  const auto few = sum_of(lines, interval_s, 10000);
  CHECK_THAT(lines_at(one_channel(few, interval_s), 0, std::vector<double>{1234.0}).refusal().reason,
             Contains("9 cycles"));
  CHECK_FALSE(lines_at(one_channel(v, interval_s), 0, std::vector<double>{60000.0}));
  CHECK_FALSE(lines_at(one_channel(v, interval_s), 1, at));
  CarrierSettings carrier;
  for (const double wrong : {0.0, 200.0, 60000.0, std::nan("")}) {
    carrier.carrier_hz = wrong;
    CHECK_FALSE(carrier_groups(one_channel(v, interval_s), 0, carrier));
  }
}

}  // namespace
}  // namespace loadstair::waveform
