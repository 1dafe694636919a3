// Twenty-two shapes, on the frequency grid against numpy on the same samples, off it against numpy's
// transform of one finely sampled cycle of the shape itself.
#include <algorithm>
#include <array>
#include <cmath>
#include <complex>
#include <iterator>
#include <numbers>
#include <string>
#include <vector>

#include "analysis/waveform/waveform.h"
#include "tests/analysis/waveform/numpy.h"

namespace loadstair::waveform {
namespace {

constexpr double kPi = std::numbers::pi;
constexpr double kTwoPi = 2.0 * kPi;
constexpr std::size_t kSamples = 20000;
constexpr int kOrders = 40;

/// How a sampled shape converges with P samples a cycle: smooth to rounding, kinks with 1/P^2, jumps with
/// 1/P.
enum class Kind { smooth, kinked, jumping };

struct Shape {
  const char* name;
  Kind kind;
  double (*at)(double angle);  ///< angle in [0, 2 pi)
};

double triangle(double a) {
  return 1.0 - 2.0 * std::abs(a / kPi - 1.0);
}
double rounded(double value, double step) {
  return step * std::round(value / step);
}

const std::array<Shape, 22> kShapes = {{
    {"sine", Kind::smooth, [](double a) { return std::sin(a); }},
    {"sine with direct component", Kind::smooth, [](double a) { return std::sin(a + 0.4) + 2.5; }},
    {"sine, small direct component", Kind::smooth, [](double a) { return std::cos(a) - 0.01; }},
    {"third in phase", Kind::smooth, [](double a) { return std::sin(a) + 0.2 * std::sin(3 * a); }},
    {"flat top", Kind::smooth,
     [](double a) { return std::sin(a) + 0.17 * std::sin(3 * a) + 0.05 * std::cos(5 * a); }},
    {"order 40", Kind::smooth, [](double a) { return std::sin(a) + 0.01 * std::cos(40 * a + 1.0); }},
    {"even orders", Kind::smooth,
     [](double a) { return std::cos(a) + 0.3 * std::cos(2 * a) + 0.1 * std::sin(4 * a); }},
    {"sine cubed", Kind::smooth, [](double a) { return std::pow(std::sin(a), 3.0); }},
    {"bell", Kind::smooth, [](double a) { return std::exp(2.0 * std::cos(a - 1.0)); }},
    {"phase modulated", Kind::smooth, [](double a) { return std::sin(a + 0.8 * std::sin(2 * a)); }},
    {"triangle", Kind::kinked, triangle},
    {"trapezoid", Kind::kinked, [](double a) { return std::clamp(2.0 * triangle(a), -1.0, 1.0); }},
    {"half wave", Kind::kinked, [](double a) { return std::max(0.0, std::sin(a)); }},
    {"clipped", Kind::kinked, [](double a) { return std::clamp(1.3 * std::sin(a + 0.3), -1.0, 1.0); }},
    {"clipped on one side, with direct component", Kind::kinked,
     [](double a) { return std::min(std::sin(a) + 0.2, 0.8); }},
    {"rectifier current", Kind::kinked,
     [](double a) { return std::max(0.0, std::cos(3 * (a - kPi / 2)) - 0.2) * (a < kPi ? 1.0 : 0.0); }},
    {"square", Kind::jumping, [](double a) { return a < kPi ? 1.0 : -1.0; }},
    {"quasi-square", Kind::jumping,
     [](double a) { return std::abs(std::sin(a)) < 0.5 ? 0.0 : (a < kPi ? 1.0 : -1.0); }},
    {"phase-cut", Kind::jumping, [](double a) { return std::fmod(a, kPi) < 1.2 ? 0.0 : std::sin(a); }},
    {"sawtooth", Kind::jumping, [](double a) { return a / kPi - 1.0; }},
    {"8 bits", Kind::jumping,
     [](double a) { return rounded(std::sin(a) + 0.1 * std::sin(3 * a), 2.2 / 256.0); }},
    {"8 bits, clipped, direct component", Kind::jumping,
     [](double a) { return rounded(std::clamp(1.2 * std::sin(a) + 0.3, -1.0, 1.0), 1.0 / 128.0); }},
}};

std::vector<double> sampled(const Shape& shape, double cycles, std::size_t samples, double first = 0.0) {
  std::vector<double> out;
  for (std::size_t k = 0; k < samples; ++k) {
    const double turns =
        std::fmod(cycles * (static_cast<double>(k) + first) / static_cast<double>(samples), 1.0);
    out.push_back(shape.at(kTwoPi * turns));
  }
  return out;
}

Waveform pair_of(const std::vector<double>& v, const std::vector<double>& i, double interval_s) {
  Waveform waveform;
  waveform.interval_s = interval_s;
  waveform.channels = {{.name = "v", .unit = "V", .values = v}, {.name = "i", .unit = "A", .values = i}};
  waveform.voltage = 0;
  waveform.current = 1;
  return waveform;
}

AnalysisSettings near(double frequency_hz) {
  AnalysisSettings settings;
  settings.fundamental_hz = frequency_hz;
  return settings;
}

std::complex<double> line_of(const Harmonic& harmonic) {
  return std::polar(std::numbers::sqrt2 * harmonic.rms, harmonic.phase_deg * kPi / 180.0);
}

TEST_CASE("22 shapes on the grid agree with numpy on the same samples to 1e-9 of the largest line") {
  // 10 cycles in 20011 samples: no cycle but the last ends on a sample. Each shape is the voltage of the next
  // one.
  std::vector<double> all;
  std::vector<std::vector<double>> shapes;
  for (const Shape& shape : kShapes) {
    // A quarter of a sample off, so that no jump falls on a sample and rounds to either side.
    shapes.push_back(sampled(shape, 10.0, shape.kind == Kind::jumping ? 20000 : 20011, 0.25));
  }
  std::vector<std::vector<double>> currents;
  for (std::size_t k = 0; k < shapes.size(); ++k) {
    const Shape& next = kShapes[(k + 1) % kShapes.size()];
    currents.push_back(sampled(next, 10.0, shapes[k].size(), 0.25));
    all.push_back(static_cast<double>(shapes[k].size()));
    all.insert(all.end(), shapes[k].begin(), shapes[k].end());
    all.insert(all.end(), currents[k].begin(), currents[k].end());
  }
  const auto reference = test::numpy(R"(
at = 0
for k in range(22):
    n = int(x[0][at])
    s, i = x[0][at + 1:at + 1 + n], x[0][at + 1 + n:at + 1 + 2 * n]
    at += 1 + 2 * n
    lines = np.fft.rfft(s) / len(s) * 2
    out(np.mean(s)); out(np.sqrt(np.mean(s * s))); out(np.mean(np.abs(s))); out(np.mean(s * i))
    for h in range(1, 41):
        out(lines[10 * h].real); out(lines[10 * h].imag)
)",
                                     {all});
  constexpr std::size_t kPerShape = 4 + 2 * kOrders;
  REQUIRE(reference.size() == 22 * kPerShape);
  for (std::size_t k = 0; k < shapes.size(); ++k) {
    INFO(kShapes[k].name);
    const auto result =
        analyse(pair_of(shapes[k], currents[k], 0.2 / static_cast<double>(shapes[k].size())), near(50.0));
    REQUIRE(result);
    REQUIRE(result->window.coherent);
    const ChannelResult& v = result->channels[0];
    const double* wanted = reference.data() + k * kPerShape;
    double largest = 0.0;
    for (std::size_t h = 0; h < kOrders; ++h)
      largest = std::max(largest, std::hypot(wanted[4 + 2 * h], wanted[5 + 2 * h]));
    const double tolerance = 1e-9 * largest;
    CHECK(std::abs(v.mean - wanted[0]) < tolerance);
    CHECK(std::abs(v.rms.value - wanted[1]) < tolerance);
    CHECK(std::abs(v.mean_rectified - wanted[2]) < tolerance);
    REQUIRE(result->power);
    CHECK(std::abs(result->power->active_w - wanted[3]) < tolerance * result->channels[1].rms.value * 2.0);
    for (std::size_t h = 0; h < kOrders; ++h) {
      INFO("order " << h + 1);
      const std::complex<double> line{wanted[4 + 2 * h], wanted[5 + 2 * h]};
      CHECK(std::abs(line_of(v.harmonics[h]) - line) < tolerance);
    }
  }
}

/// Mean, RMS, rectified mean and lines of one finely sampled cycle of every shape, by numpy; a jump to
/// 1/65536.
struct Fine {
  double mean, rms, rectified;
  std::array<std::complex<double>, kOrders> line;
};
std::vector<Fine> fine_cycles() {
  constexpr std::size_t kFine = 65536;
  std::vector<double> all;
  for (const Shape& shape : kShapes) {
    const auto cycle = sampled(shape, 1.0, kFine, 0.5);
    all.insert(all.end(), cycle.begin(), cycle.end());
  }
  const auto values = test::numpy(R"(
a = x[0].reshape(22, 65536)
for s in a:
    lines = np.fft.rfft(s) / len(s) * 2 * np.exp(-1j * np.pi * np.arange(32769) / 65536)
    out(np.mean(s)); out(np.sqrt(np.mean(s * s))); out(np.mean(np.abs(s)))
    for h in range(1, 41):
        out(lines[h].real); out(lines[h].imag)
)",
                                  {all});
  std::vector<Fine> out;
  for (std::size_t k = 0; k < kShapes.size(); ++k) {
    const double* at = values.data() + k * (3 + 2 * kOrders);
    Fine fine{at[0], at[1], at[2], {}};
    for (std::size_t h = 0; h < kOrders; ++h) fine.line[h] = {at[3 + 2 * h], at[4 + 2 * h]};
    out.push_back(fine);
  }
  return out;
}

TEST_CASE("22 shapes off the grid agree with the shapes' own Fourier series") {
  const auto reference = fine_cycles();
  for (const auto& [frequency_hz, duration_s] :
       {std::pair{49.3, 0.2}, std::pair{50.7, 0.2}, std::pair{61.7, 0.2}, std::pair{50.0, 0.07}}) {
    const double cycles = frequency_hz * duration_s;
    const double per_cycle = static_cast<double>(kSamples) / cycles;
    std::array<double, 3> worst{};
    for (std::size_t k = 0; k < kShapes.size(); ++k) {
      const auto v = sampled(kShapes[k], cycles, kSamples);
      const auto result = analyse(pair_of(v, v, duration_s / kSamples), near(frequency_hz));
      INFO(kShapes[k].name << ", " << cycles << " cycles");
      REQUIRE(result);
      CHECK(result->window.cycles == static_cast<int>(std::floor(cycles)));
      const ChannelResult& channel = result->channels[0];
      const Fine& fine = reference[k];
      double off = std::max(std::abs(channel.mean - fine.mean), std::abs(channel.rms.value - fine.rms));
      if (kShapes[k].kind != Kind::smooth)
        off = std::max(off, std::abs(channel.mean_rectified - fine.rectified));
      double largest = 0.0;
      for (std::size_t h = 0; h < kOrders; ++h) {
        off =
            std::max(off, std::abs(std::numbers::sqrt2 * channel.harmonics[h].rms - std::abs(fine.line[h])));
        largest = std::max(largest, std::abs(fine.line[h]));
      }
      double& of_kind = worst[static_cast<std::size_t>(kShapes[k].kind)];
      of_kind = std::max(of_kind, off / largest);
      // The fundamental's phase at the first sample, as sure as the frequency over the record.
      CHECK(std::abs(line_of(channel.harmonics[0]) - fine.line[0]) <
            largest * (kShapes[k].kind == Kind::smooth ? 1e-7 : 4.0 / per_cycle));
    }
    CAPTURE(frequency_hz, duration_s, worst[0], worst[1], worst[2]);
    CHECK(worst[0] < 1e-10);
    CHECK(worst[1] < 10.0 / (per_cycle * per_cycle));
    CHECK(worst[2] < 2.0 / per_cycle);
  }
}

}  // namespace
}  // namespace loadstair::waveform
