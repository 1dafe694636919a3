// Waveforms against their closed forms (Fourier series). Source: SOURCE.md.
#include <cmath>
#include <functional>
#include <numbers>
#include <vector>

#include "analysis/waveform/waveform.h"
#include "tests/published/table.h"

namespace loadstair::waveform {
namespace {

using published::number;
using published::read_table;

constexpr double kPi = std::numbers::pi;
constexpr int kPerCycle = 20000;
constexpr int kCycles = 4;

double parameter_of(const published::Row& row) {
  std::string text = row.at("parameter");
  if (text.rfind("d=pi*1/", 0) == 0) return kPi / base::parse_number(text.substr(7)).value();
  return text.empty() ? 0.0 : base::parse_number(text).value();
}

/// Value at the phase x in [0, 2 pi). Jumps fall between samples, which are taken half a step off the zero.
std::function<double(double)> wave_of(const std::string& name, double p) {
  const double rad = p * kPi / 180.0;
  const auto half_angle = [](double x) { return std::fmod(x, kPi); };
  if (name == "sine") return [](double x) { return std::sin(x); };
  if (name == "square") return [](double x) { return x < kPi ? 1.0 : -1.0; };
  if (name == "triangle") return [](double x) { return 2.0 / kPi * std::asin(std::sin(x)); };
  if (name == "sawtooth") return [](double x) { return x / kPi - 1.0; };
  if (name == "half-wave rectified sine") return [](double x) { return std::max(0.0, std::sin(x)); };
  if (name == "full-wave rectified sine") return [](double x) { return std::abs(std::sin(0.5 * x)); };
  if (name == "phase-cut sine, leading edge") {
    return [=](double x) { return half_angle(x) < rad ? 0.0 : std::sin(x); };
  }
  if (name == "trapezoid, ramp angle d (0 to peak)") {
    return [=](double x) {
      const double y = half_angle(x);
      const double level = std::min({1.0, y / p, (kPi - y) / p});
      return x < kPi ? level : -level;
    };
  }
  if (name == "quasi-square (zero for angle g each side)") {
    return [=](double x) {
      const double y = half_angle(x);
      const double level = y < rad || y > kPi - rad ? 0.0 : 1.0;
      return x < kPi ? level : -level;
    };
  }
  if (name == "unipolar pulse train, duty D") return [=](double x) { return x < 2.0 * kPi * p ? 1.0 : 0.0; };
  if (name == "dc 1 with triangular ripple, peak-to-peak r") {
    return [=](double x) { return 1.0 + p / kPi * std::asin(std::sin(x)); };
  }
  FAIL("unknown waveform " << name);
  return {};
}

TEST_CASE("sampled waveforms have the RMS, crest factor, form factor and THD of their closed forms") {
  const auto rows = read_table("waveform_closed_forms/closed_forms.csv");
  REQUIRE(rows.size() == 40);
  for (const auto& row : rows) {
    const auto wave = wave_of(row.at("waveform"), parameter_of(row));
    std::vector<double> samples;
    for (int k = 0; k < kPerCycle * kCycles; ++k) {
      samples.push_back(wave(2.0 * kPi * ((k % kPerCycle) + 0.5) / kPerCycle));
    }
    Waveform waveform;
    waveform.interval_s = 0.02 / kPerCycle;
    waveform.channels = {{.name = "v", .unit = "V", .values = samples}};
    const auto result = analyse(waveform);
    INFO(row.at("waveform") << " " << row.at("parameter"));
    REQUIRE(result);
    REQUIRE(result->fundamental);
    CHECK(result->window.coherent);
    CHECK(result->window.cycles == kCycles);
    const ChannelResult& v = result->channels[0];
    // A jump of height 1 lies within one sample of 20000: mean and mean square are right to 1/20000; ratios
    // accordingly.
    constexpr double kTolerance = 1.0 / kPerCycle;
    const double rms = number(row, "rms");
    CHECK(std::abs(v.mean - number(row, "dc")) < kTolerance);
    CHECK(std::abs(v.rms.value - rms) < kTolerance / rms);
    CHECK(std::abs(v.mean_rectified - number(row, "mean_rectified")) < 2.0 * kTolerance);
    CHECK(std::abs(v.peak.value - number(row, "peak")) < 2.0 * kPi * kTolerance);
    REQUIRE(v.crest_factor);
    CHECK(v.crest_factor->value ==
          Approx(number(row, "crest_factor")).epsilon(8.0 * kTolerance / (rms * rms)));
    REQUIRE(v.form_factor);
    CHECK(*v.form_factor == Approx(number(row, "form_factor"))
                                .epsilon(2.0 * kTolerance * (1.0 / (rms * rms) + 1.0 / v.mean_rectified)));
    const double amplitude = number(row, "fundamental_amplitude");
    CHECK(std::abs(v.harmonics[0].rms * std::numbers::sqrt2 - amplitude) < 2.0 * kTolerance);
    // All orders count in the closed form: that is the total distortion. Without a jump it is as exact as the
    // sampling (squares of lines beyond half the sampling rate), with one to the mean square's tolerance.
    const double distortion = number(row, "THD_F_without_dc");
    REQUIRE(v.total_distortion);
    const double of_square = 4.0 * kTolerance / (amplitude * amplitude);
    CHECK(std::abs(*v.total_distortion * *v.total_distortion - distortion * distortion) <
          of_square * (1.0 + distortion * distortion));
    const double with_mean = std::hypot(*v.total_distortion, v.mean / v.harmonics[0].rms);
    const double counted = number(row, "THD_F_with_dc_counted");
    CHECK(std::abs(with_mean * with_mean - counted * counted) < of_square * (1.0 + counted * counted));
    // What the first 40 orders hold can only be less.
    REQUIRE(v.thd_f);
    CHECK(*v.thd_f <= *v.total_distortion + 1e-9);
  }
}

}  // namespace
}  // namespace loadstair::waveform
