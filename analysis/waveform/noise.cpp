#include "analysis/waveform/noise.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>
#include <span>

#include "analysis/waveform/channel.h"
#include "analysis/waveform/lines.h"
#include "analysis/waveform/transform.h"

namespace loadstair::waveform {
namespace {

constexpr double kTwoPi = 2.0 * std::numbers::pi;
constexpr int kHannCycles = 6;  // fewer leave a Hann line no room between harmonics
constexpr std::size_t kLeastOrdinates = 8;
constexpr std::size_t kMostBlocks = 64;

/// Variance per sample that each ordinate of the spectrum speaks for; first is the frequency's index.
struct Ordinate {
  std::size_t index = 0;
  double variance = 0.0;
};

bool near_harmonic(std::size_t index, double cycles, double reach) {
  const double order = std::round(static_cast<double>(index) / cycles);
  return std::abs(static_cast<double>(index) - order * cycles) < reach;
}

/// The first samples of a coherent window that hold whole cycles, as many as say enough of the noise.
std::size_t coherent_count(const CycleWindow& window) {
  constexpr double kEnough = 262144.0;
  const int most = std::min(window.cycles, std::max(8, static_cast<int>(kEnough / window.period)));
  for (int cycles = most; cycles >= std::min(window.cycles, kHannCycles); --cycles) {
    const double length = cycles * window.period;
    if (std::abs(length - std::round(length)) < 1e-6) return static_cast<std::size_t>(std::round(length));
  }
  return window.span.past - window.span.first;
}

struct Spectrum {
  std::vector<Ordinate> ordinates;  ///< between the harmonics
  double per_order = 0.0;           ///< index of the fundamental
};

Spectrum between_harmonics(const Prepared& channel, const CycleWindow& window, double mean,
                           const std::vector<std::complex<double>>& lines) {
  const std::size_t first = window.coherent ? window.span.first : 0;
  const std::size_t count = window.coherent ? coherent_count(window) : channel.size();
  std::vector<double> rest(count);
  for (std::size_t k = 0; k < count; ++k) rest[k] = channel[first + k] - mean;
  if (!window.coherent) subtract_lines(rest, lines, window.period);
  const bool hann = window.cycles >= kHannCycles || !window.coherent;
  const double length = static_cast<double>(count);
  double weight_square = 0.0;
  const auto spectrum = real_transform(count, [&](double* into) {
    for (std::size_t k = 0; k < count; ++k) {
      const double weight =
          hann ? 0.5 - 0.5 * std::cos(kTwoPi * (static_cast<double>(k) + 0.5) / length) : 1.0;
      weight_square += weight * weight;
      into[k] = weight * rest[k];
    }
  });
  // Harmonics above the highest order are still there: they are left out as far as others remain.
  const double cycles = length / window.period;
  const double reach = window.cycles < 3 ? 0.5 : (hann && window.cycles >= kHannCycles ? 1.5 : 0.75);
  Spectrum out{{}, cycles};
  for (std::size_t k = 2; k + 1 < spectrum.size(); ++k) {
    if (!near_harmonic(k, cycles, reach)) {
      out.ordinates.push_back({k, std::norm(spectrum[k]) / weight_square});
    }
  }
  return out;
}

/// Mean of exponential variates from their median. Precondition: not empty.
double variance_of(std::span<const Ordinate> ordinates) {
  std::vector<double> values;
  values.reserve(ordinates.size());
  for (const Ordinate& ordinate : ordinates) values.push_back(ordinate.variance);
  return median(values) / std::numbers::ln2;
}

}  // namespace

Noise noise_of(const Prepared& channel, const CycleWindow& window, double mean,
               const std::vector<std::complex<double>>& lines, double residual_rms, double step) {
  double whole = residual_rms * residual_rms;
  double in_band = whole;
  const Spectrum spectrum = window.cycles < 2 ? Spectrum{} : between_harmonics(channel, window, mean, lines);
  const auto& ordinates = spectrum.ordinates;
  if (ordinates.size() >= kLeastOrdinates) {
    const std::size_t blocks = std::clamp<std::size_t>(ordinates.size() / 32, 1, kMostBlocks);
    whole = 0.0;
    for (std::size_t b = 0; b < blocks; ++b) {
      const std::size_t from = b * ordinates.size() / blocks;
      const std::size_t to = (b + 1) * ordinates.size() / blocks;
      whole += variance_of(std::span{ordinates}.subspan(from, to - from)) * static_cast<double>(to - from) /
               static_cast<double>(ordinates.size());
    }
    const auto past_band = std::partition_point(ordinates.begin(), ordinates.end(), [&](const Ordinate& o) {
      return static_cast<double>(o.index) < (static_cast<double>(lines.size()) + 0.5) * spectrum.per_order;
    });
    const auto band = static_cast<std::size_t>(past_band - ordinates.begin());
    in_band = band >= kLeastOrdinates ? variance_of(std::span{ordinates}.first(band)) : whole;
  }
  const double steps = step * step / 12.0;
  Noise out{std::sqrt(std::max(whole, steps)), std::sqrt(2.0 * in_band / window.span.length())};
  // Rounding that no noise spreads repeats with every cycle, and its power sits on the harmonics alone.
  if (in_band < 0.5 * steps) out.line_rms = std::max(out.line_rms, std::sqrt(2.0 * steps / window.period));
  return out;
}

double noise_of_direct(const Prepared& channel) {
  double square = 0.0;
  for (std::size_t k = 2; k < channel.size(); ++k) {
    const double second = channel[k] - 2.0 * channel[k - 1] + channel[k - 2];
    square += second * second;
  }
  return std::sqrt(square / static_cast<double>(channel.size() - 2) / 6.0);
}

Steps steps_of(const Prepared& channel, std::size_t first, std::size_t past) {
  constexpr std::size_t kEnough = 65536;
  const auto begin = channel.samples.begin() + static_cast<std::ptrdiff_t>(first);
  std::vector<double> value(begin, begin + static_cast<std::ptrdiff_t>(std::min(past - first, kEnough)));
  std::sort(value.begin(), value.end());
  // Smaller gaps are rounding of the numbers themselves.
  constexpr double kSame = 1e-9;
  const double same = kSame * (value.back() - value.front());
  const auto end = std::unique(value.begin(), value.end(), [&](double a, double b) { return b - a <= same; });
  value.erase(end, value.end());
  Steps out;
  out.levels = static_cast<int>(std::min<std::size_t>(value.size(), 4));
  if (value.size() < 2) return out;
  double step = std::numeric_limits<double>::infinity();
  for (std::size_t k = 1; k < value.size(); ++k) step = std::min(step, value[k] - value[k - 1]);
  // Every gap a whole number of steps, to what printed digits leave; the step is refined on the way up.
  constexpr double kOffStep = 0.1;
  double steps = 0.0;
  for (std::size_t k = 1; k < value.size(); ++k) {
    const double gap = (value[k] - value[k - 1]) / step;
    if (std::abs(gap - std::round(gap)) > kOffStep) return out;
    steps += std::round(gap);
    if (k > 1) step = (value[k] - value.front()) / steps;
  }
  out.step = step;
  return out;
}

}  // namespace loadstair::waveform
