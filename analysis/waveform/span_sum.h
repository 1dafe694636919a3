// Integrals of sampled signals between two positions that need not fall on samples; private to this room.
#pragma once

#include <array>
#include <cstddef>
#include <span>

namespace loadstair::waveform {

inline constexpr std::size_t kEndPoints = 6;

/// The integral over [begin, end] (positions in samples) as a sum with unit weights and corrected ends: exact
/// for polynomials up to degree 5, and for a periodic signal over whole cycles as exact as the plain sum is
/// when both ends fall on samples. Ends may lie up to one sample outside the record. Source: Gregory's and
/// Euler-Maclaurin's end corrections (any text on numerical integration), stated through Bernoulli numbers so
/// that an end may lie between samples.
struct SpanSum {
  double begin = 0.0;
  double end = 0.0;
  std::size_t first = 0;  ///< samples first .. past - 1 count with weight 1, then the corrections are added
  std::size_t past = 0;
  std::size_t head = 0;  ///< first sample of the correction at the begin
  std::size_t tail = 0;  ///< and at the end
  std::array<double, kEndPoints> head_correction{};
  std::array<double, kEndPoints> tail_correction{};

  [[nodiscard]] double length() const { return end - begin; }

  /// Plain sum over whole samples: begin and end fall on samples, the last one not counted.
  static SpanSum whole_samples(std::size_t first, std::size_t count);

  /// samples: of the record, at least 2 * kEndPoints. Precondition: -1 <= begin < end <= samples.
  static SpanSum between(double begin, double end, std::size_t samples);

  /// sum of weight_k f(k); f gives a number, or anything with += and a double times it. Partial sums of 1024
  /// keep rounding small.
  template <class F>
  [[nodiscard]] auto sum(F f) const {
    decltype(f(std::size_t{})) total{};
    for (std::size_t start = first; start < past; start += kChunk) {
      const std::size_t stop = past - start < kChunk ? past : start + kChunk;
      decltype(total) part{};
      for (std::size_t k = start; k < stop; ++k) part += f(k);
      total += part;
    }
    for (std::size_t j = 0; j < kEndPoints; ++j) {
      if (head_correction[j] != 0.0) total += head_correction[j] * f(head + j);
      if (tail_correction[j] != 0.0) total += tail_correction[j] * f(tail + j);
    }
    return total;
  }

  /// Mean over the span.
  template <class F>
  [[nodiscard]] double mean(F f) const {
    return sum(f) / length();
  }

  static constexpr std::size_t kChunk = 1024;
};

}  // namespace loadstair::waveform
