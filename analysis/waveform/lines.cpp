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
template <class Samples>
void add_samples(std::vector<Complex>& sums, const Samples& samples, double mean, std::size_t first,
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
      value[l] = samples[k + l] - mean;
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
  for (; k < past; ++k) {
    add_sample(sums, samples[k] - mean, -std::fmod(static_cast<double>(k) * omega, kTwoPi));
  }
}

/// End-corrected amplitudes of all orders of any samples over a span.
template <class Samples>
std::vector<Complex> span_lines(const Samples& samples, const SpanSum& span, double period, double mean,
                                std::size_t orders) {
  std::vector<Complex> lines(orders);
  const double omega = kTwoPi / period;
  add_samples(lines, samples, mean, span.first, span.past, omega);
  const auto correct = [&](std::size_t at, double weight) {
    if (weight != 0.0) {
      add_sample(lines, weight * (samples[at] - mean), -std::fmod(omega * static_cast<double>(at), kTwoPi));
    }
  };
  for (std::size_t j = 0; j < kEndPoints; ++j) {
    correct(span.head + j, span.head_correction[j]);
    correct(span.tail + j, span.tail_correction[j]);
  }
  for (Complex& line : lines) line *= 2.0 / span.length();
  return lines;
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
  return span_lines(channel, span, period, 0.0, 1)[0];
}

void subtract_lines(std::vector<double>& samples, const std::vector<Complex>& lines, double period) {
  const double omega = kTwoPi / period;
  for (std::size_t k = 0; k < samples.size(); ++k) {
    const Complex base = std::polar(1.0, std::fmod(static_cast<double>(k) * omega, kTwoPi));
    Complex sum = 0.0;  // Horner in exp(j w k)
    for (std::size_t h = lines.size(); h-- > 0;) {
      const Complex term = sum + lines[h];
      sum = {term.real() * base.real() - term.imag() * base.imag(),
             term.real() * base.imag() + term.imag() * base.real()};
    }
    samples[k] -= sum.real();
  }
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
  lines = span_lines(channel, span, window.period, mean, lines.size());
  // Where a high order has few samples a cycle, its neighbours leak through the ends. What the lines leave of
  // the samples is analysed again: lines that are there become exact, the rest is as before.
  constexpr double kFineSampling = 50.0;
  if (window.period >= kFineSampling * orders) return lines;
  std::vector<double> rest(channel.size());
  for (std::size_t k = 0; k < rest.size(); ++k) rest[k] = channel[k] - mean;
  std::vector<Complex> correction = lines;
  constexpr int kRounds = 3;
  for (int round = 0; round < kRounds; ++round) {
    subtract_lines(rest, correction, window.period);
    correction = span_lines(rest, span, window.period, 0.0, lines.size());
    for (std::size_t h = 0; h < lines.size(); ++h) lines[h] += correction[h];
  }
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
