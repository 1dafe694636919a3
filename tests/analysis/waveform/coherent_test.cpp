// Coherent captures against plain numpy on the same samples, to 1e-9 of the largest line.
#include <cmath>
#include <numbers>
#include <random>
#include <span>
#include <vector>

#include "analysis/waveform/waveform.h"
#include "tests/analysis/waveform/numpy.h"

namespace loadstair::waveform {
namespace {

constexpr double kTwoPi = 2.0 * std::numbers::pi;

struct Capture {
  std::vector<double> v, i;
  int cycles;
};

/// 230 V with harmonics and direct component, a distorted lagging current, noise and quantisation as asked
/// for.
Capture make(std::size_t samples, int cycles, double noise, double step) {
  std::mt19937_64 random{20240117};
  const auto draw = [&] { return static_cast<double>(random() >> 11) * 0x1p-53 - 0.5; };
  Capture out{{}, {}, cycles};
  for (std::size_t k = 0; k < samples; ++k) {
    const double a = kTwoPi * cycles * static_cast<double>(k) / static_cast<double>(samples);
    double v = 325.0 * std::sin(a + 0.3) + 6.5 * std::cos(3 * a - 1.0) + 3.1 * std::sin(5 * a) +
               0.4 * std::cos(40 * a) + 0.35;
    double i = 3.7 * std::sin(a - 0.2) + 0.5 * std::sin(3 * a + 2.0) + 0.11 * std::cos(7 * a) - 0.02;
    v += noise * 325.0 * draw();
    i += noise * 3.7 * draw();
    if (step > 0.0) {
      v = step * 325.0 * std::round(v / (step * 325.0));
      i = step * 3.7 * std::round(i / (step * 3.7));
    }
    out.v.push_back(v);
    out.i.push_back(i);
  }
  return out;
}

TEST_CASE("coherent captures agree with numpy to 1e-9 of the largest line") {
  struct Kind {
    std::size_t samples;
    int cycles;
    double noise, step;
  };
  const auto kind = GENERATE(Kind{5000, 10, 0.0, 0.0}, Kind{5000, 7, 0.0, 0.0}, Kind{10000, 10, 0.01, 0.0},
                             Kind{5000, 10, 0.0, 2.0 / 256}, Kind{20011, 12, 0.003, 1.0 / 4096},
                             Kind{1999, 2, 0.0, 0.0}, Kind{200000, 25, 0.02, 0.0});
  const Capture capture = make(kind.samples, kind.cycles, kind.noise, kind.step);
  Waveform waveform;
  waveform.interval_s = kind.cycles / 50.0 / static_cast<double>(kind.samples);
  waveform.channels = {{.name = "v", .unit = "V", .values = capture.v},
                       {.name = "i", .unit = "A", .values = capture.i}};
  waveform.voltage = 0;
  waveform.current = 1;
  const auto result = analyse(waveform);
  INFO(kind.samples << " samples, " << kind.cycles << " cycles, noise " << kind.noise << ", step "
                    << kind.step);
  REQUIRE(result);
  CHECK(result->window.cycles == kind.cycles);
  CHECK(result->window.coherent);
  REQUIRE(result->fundamental);
  CHECK(result->fundamental->frequency_hz == Approx(50.0).epsilon(1e-12));

  const std::string script = "K = " + std::to_string(kind.cycles) + R"(
for a in x:
    out(np.mean(a)); out(np.sqrt(np.mean(a * a))); out(np.mean(np.abs(a))); out(np.max(np.abs(a)))
    s = np.fft.rfft(a) / len(a) * 2
    for h in range(1, 41):
        out(np.abs(s[h * K]) / np.sqrt(2)); out(np.angle(s[h * K], deg=True))
v, i = x
out(np.mean(v * i))
)";
  const auto reference = test::numpy(script, {capture.v, capture.i});
  REQUIRE(reference.size() == 2 * 84 + 1);
  std::size_t at = 0;
  for (const ChannelResult& channel : result->channels) {
    INFO("channel " << channel.name);
    const double largest = reference[at + 4];
    const double tolerance = 1e-9 * largest;
    CHECK(std::abs(channel.mean - reference[at]) < tolerance);
    CHECK(std::abs(channel.rms.value - reference[at + 1]) < tolerance);
    CHECK(std::abs(channel.mean_rectified - reference[at + 2]) < tolerance);
    CHECK(channel.peak.value == reference[at + 3]);
    double harmonics = 0.0;
    REQUIRE(channel.harmonics.size() == 40);
    for (std::size_t h = 0; h < 40; ++h) {
      const double rms = reference[at + 4 + 2 * h];
      const double phase = reference[at + 5 + 2 * h];
      CHECK(std::abs(channel.harmonics[h].rms - rms) < tolerance);
      // The phase of a line is as sure as its size allows.
      if (rms > 1e-6 * largest) {
        const double turn = std::remainder(channel.harmonics[h].phase_deg - phase, 360.0);
        CHECK(std::abs(turn) < 180.0 / std::numbers::pi * tolerance / rms);
      }
      if (h > 0) harmonics += rms * rms;
    }
    REQUIRE(channel.thd_f);
    CHECK(*channel.thd_f == Approx(std::sqrt(harmonics) / largest).epsilon(1e-8));
    CHECK(*channel.thd_r == Approx(std::sqrt(harmonics / (harmonics + largest * largest))).epsilon(1e-8));
    REQUIRE(channel.crest_factor);
    CHECK(channel.crest_factor->value == Approx(reference[at + 3] / reference[at + 1]).epsilon(1e-9));
    CHECK(*channel.form_factor == Approx(reference[at + 1] / reference[at + 2]).epsilon(1e-9));
    at += 84;
  }
  REQUIRE(result->power);
  CHECK(result->power->active_w == Approx(reference.back()).epsilon(1e-9));
  CHECK(result->power->apparent_va == Approx(reference[1] * reference[85]).epsilon(1e-9));
}

}  // namespace
}  // namespace loadstair::waveform
