// Sine-triangle PWM against its double Fourier series. Source: SOURCE.md.
#include <cmath>
#include <numbers>
#include <vector>

#include "analysis/waveform/waveform.h"
#include "tests/published/table.h"

namespace loadstair::waveform {
namespace {

using published::number;

constexpr double kPi = std::numbers::pi;

/// Share of the sample's interval [y, y + dy) during which M cos lies above the carrier, as a level from -1
/// to 1: the signal is averaged over each sample, so that its spectrum is that of the switched signal times a
/// known sinc. Edges are found by bisection on the exact crossing.
double averaged_leg(double modulation, double ratio, double y, double dy) {
  const auto above = [&](double at) {
    double x = std::remainder(ratio * at, 2.0 * kPi);
    return modulation * std::cos(at) - (-1.0 + 2.0 * std::abs(x) / kPi);
  };
  double inside = 0.0;
  constexpr int kParts = 4;
  for (int part = 0; part < kParts; ++part) {
    double a = y + dy * part / kParts;
    double b = y + dy * (part + 1) / kParts;
    const bool a_up = above(a) > 0.0;
    const bool b_up = above(b) > 0.0;
    if (a_up == b_up) {
      inside += a_up ? b - a : 0.0;
      continue;
    }
    const double start = a, stop = b;
    for (int i = 0; i < 60; ++i) {
      const double middle = 0.5 * (a + b);
      ((above(middle) > 0.0) == a_up ? a : b) = middle;
    }
    inside += a_up ? a - start : stop - a;
  }
  return 2.0 * inside / dy - 1.0;
}

TEST_CASE("the spectrum of two- and three-level PWM is that of the double Fourier series") {
  constexpr std::size_t kPerCycle = 16384;
  constexpr int kCycles = 3;
  constexpr double kStep = 2.0 * kPi / kPerCycle;
  std::vector<double> two(kPerCycle * kCycles), three(kPerCycle * kCycles);
  for (std::size_t k = 0; k < two.size(); ++k) {
    const double y =
        kStep * (static_cast<double>(k % kPerCycle) - 0.5);  // averaged about the sample's own time
    two[k] = averaged_leg(0.8, 21.0, y, kStep);
    three[k] = 0.5 * (two[k] - averaged_leg(-0.8, 21.0, y, kStep));
  }
  Waveform waveform;
  waveform.interval_s = 0.02 / kPerCycle;
  waveform.channels = {{.name = "two", .unit = "V", .values = two},
                       {.name = "three", .unit = "V", .values = three}};
  AnalysisSettings settings;
  settings.harmonics = 130;
  settings.fundamental_hz = 50.0;  // the carrier of two-level PWM is the larger line
  const auto result = analyse(waveform, settings);
  REQUIRE(result);
  REQUIRE(result->window.coherent);
  REQUIRE(result->window.cycles == kCycles);
  for (const auto& row : published::read_table("spwm/spectrum_m0.8_ratio21.csv")) {
    const double order = number(row, "harmonic_order");
    INFO("order " << order);
    const double angle = order * kStep / 2.0;
    const double averaging = std::sin(angle) / angle;
    const auto h = static_cast<std::size_t>(order) - 1;
    const char* columns[] = {"two_level_amplitude_double_fourier", "three_level_amplitude_double_fourier"};
    for (std::size_t c = 0; c < 2; ++c) {
      const Harmonic& line = result->channels[c].harmonics[h];
      const double wanted = number(row, columns[c]) * averaging;
      const double got = line.rms * std::numbers::sqrt2 * std::cos(line.phase_deg * kPi / 180.0);
      // 1e-10 is printed. Lines near the sampling rate, order 16384 (side lines of carrier multiple 780, at
      // most 4/(pi 780)), fold back, reduced by the averaging to order/16384 of themselves.
      CHECK(std::abs(got - wanted) < 1e-9 + 4.0 / (kPi * 780.0) * order / kPerCycle);
    }
  }
}

}  // namespace
}  // namespace loadstair::waveform
