#include "analysis/waveform/lines.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <numbers>

#include "analysis/waveform/transform.h"

namespace loadstair::waveform {
namespace {

constexpr double kTwoPi = 2.0 * std::numbers::pi;
constexpr std::size_t kLanes = 8;
constexpr std::size_t kBlocksBetweenResync = 64;

using Complex = std::complex<double>;

/// One sample's share of all orders, for the ends.
void add_sample(std::vector<Complex>& sums, double value, double angle) {
  for (std::size_t h = 0; h < sums.size(); ++h)
    sums[h] += value * std::polar(1.0, angle * static_cast<double>(h + 1));
}

/// Sums of orders 1 .. sums.size() over samples [first, past) by running products, eight samples side by
/// side.
void add_samples(std::vector<Complex>& sums, const Prepared& channel, double mean, std::size_t first,
                 std::size_t past, double omega) {
  using Lane = std::array<double, kLanes>;
  const std::size_t orders = sums.size();
  std::vector<Lane> real(orders, Lane{});
  std::vector<Lane> imaginary(orders, Lane{});
  Lane base_real{}, base_imaginary{}, value{}, power_real{}, power_imaginary{};
  const double step_real = std::cos(omega * kLanes);
  const double step_imaginary = -std::sin(omega * kLanes);
  std::size_t block = 0;
  std::size_t k = first;
  for (; k + kLanes <= past; k += kLanes, ++block) {
    if (block % kBlocksBetweenResync == 0) {
      for (std::size_t l = 0; l < kLanes; ++l) {
        const double angle = std::fmod(static_cast<double>(k + l) * omega, kTwoPi);
        base_real[l] = std::cos(angle);
        base_imaginary[l] = -std::sin(angle);
      }
    }
    for (std::size_t l = 0; l < kLanes; ++l) {
      value[l] = channel[k + l] - mean;
      power_real[l] = value[l] * base_real[l];
      power_imaginary[l] = value[l] * base_imaginary[l];
    }
    for (std::size_t h = 0; h < orders; ++h) {
      for (std::size_t l = 0; l < kLanes; ++l) {
        real[h][l] += power_real[l];
        imaginary[h][l] += power_imaginary[l];
        const double next = power_real[l] * base_real[l] - power_imaginary[l] * base_imaginary[l];
        power_imaginary[l] = power_real[l] * base_imaginary[l] + power_imaginary[l] * base_real[l];
        power_real[l] = next;
      }
    }
    for (std::size_t l = 0; l < kLanes; ++l) {
      const double next = base_real[l] * step_real - base_imaginary[l] * step_imaginary;
      base_imaginary[l] = base_real[l] * step_imaginary + base_imaginary[l] * step_real;
      base_real[l] = next;
    }
  }
  for (std::size_t h = 0; h < orders; ++h) {
    for (std::size_t l = 0; l < kLanes; ++l) sums[h] += Complex{real[h][l], imaginary[h][l]};
  }
  for (; k < past; ++k)
    add_sample(sums, channel[k] - mean, -std::fmod(static_cast<double>(k) * omega, kTwoPi));
}

/// Weights of eight neighbouring samples at 0 .. 7 for a position among them (Lagrange).
std::array<double, 8> lagrange(double position) {
  std::array<double, 8> weight{};
  for (std::size_t j = 0; j < weight.size(); ++j) {
    double w = 1.0;
    for (std::size_t i = 0; i < weight.size(); ++i) {
      if (i != j)
        w *= (position - static_cast<double>(i)) / (static_cast<double>(j) - static_cast<double>(i));
    }
    weight[j] = w;
  }
  return weight;
}

}  // namespace

Complex fundamental_sum(const Prepared& channel, const SpanSum& span, double period) {
  const double omega = kTwoPi / period;
  std::vector<Complex> sums(1);
  add_samples(sums, channel, 0.0, span.first, span.past, omega);
  for (std::size_t j = 0; j < kEndPoints; ++j) {
    for (const auto& [at, weight] :
         {std::pair{span.head + j, span.head_correction[j]}, {span.tail + j, span.tail_correction[j]}}) {
      if (weight != 0.0) add_sample(sums, weight * channel[at], -omega * static_cast<double>(at));
    }
  }
  return sums[0];
}

std::vector<Complex> line_amplitudes(const Prepared& channel, const CycleWindow& window, double mean,
                                     int orders) {
  std::vector<Complex> lines(static_cast<std::size_t>(orders));
  const SpanSum& span = window.span;
  if (window.coherent) {
    const std::size_t count = span.past - span.first;
    const auto spectrum = real_transform(count, [&](double* into) {
      for (std::size_t k = 0; k < count; ++k) into[k] = channel[span.first + k];
    });
    for (std::size_t h = 0; h < lines.size(); ++h) {
      lines[h] =
          2.0 / static_cast<double>(count) * spectrum[(h + 1) * static_cast<std::size_t>(window.cycles)];
    }
    return lines;
  }
  const double omega = kTwoPi / window.period;
  add_samples(lines, channel, mean, span.first, span.past, omega);
  for (std::size_t j = 0; j < kEndPoints; ++j) {
    for (const auto& [at, weight] :
         {std::pair{span.head + j, span.head_correction[j]}, {span.tail + j, span.tail_correction[j]}}) {
      add_sample(lines, weight * (channel[at] - mean), -std::fmod(omega * static_cast<double>(at), kTwoPi));
    }
  }
  for (Complex& line : lines) line *= 2.0 / span.length();
  return lines;
}

void resample(const Prepared& channel, double begin, double length, std::size_t count, double* into) {
  const double step = length / static_cast<double>(count);
  constexpr double kLeft = 3.0;
  const double last_first = static_cast<double>(channel.size() - 8);
  for (std::size_t i = 0; i < count; ++i) {
    const double position = begin + step * static_cast<double>(i);
    const double whole = std::round(position);
    if (std::abs(position - whole) < 1e-9 && whole >= 0.0 && whole < static_cast<double>(channel.size())) {
      into[i] = channel[static_cast<std::size_t>(whole)];
      continue;
    }
    const auto first = static_cast<std::size_t>(std::clamp(std::floor(position) - kLeft, 0.0, last_first));
    const auto weight = lagrange(position - static_cast<double>(first));
    double value = 0.0;
    for (std::size_t j = 0; j < weight.size(); ++j) value += weight[j] * channel[first + j];
    into[i] = value;
  }
}

}  // namespace loadstair::waveform
