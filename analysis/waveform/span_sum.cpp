#include "analysis/waveform/span_sum.h"

#include <algorithm>
#include <cmath>

#include "analysis/base/require.h"

namespace loadstair::waveform {
namespace {

using Weights = std::array<double, kEndPoints>;

/// Weights w_j of samples at 0, 1, ..., so that all samples below 0 with weight 1, and these, integrate up to
/// `end`: sum_j w_j j^r = (end^(r+1) - B_(r+1))/(r+1), r = 0 .. kEndPoints - 1. The Vandermonde system is
/// solved as in Golub and Van Loan, Matrix Computations, algorithm 4.6.2.
Weights end_weights(double end) {
  static_assert(kEndPoints == 6);
  constexpr Weights kBernoulli = {-1.0 / 2, 1.0 / 6, 0.0, -1.0 / 30, 0.0, 1.0 / 42};
  Weights w{};
  double power = end;
  for (std::size_t r = 0; r < kEndPoints; ++r) {
    w[r] = (power - kBernoulli[r]) / static_cast<double>(r + 1);
    power *= end;
  }
  constexpr std::size_t kLast = kEndPoints - 1;
  for (std::size_t k = 0; k < kLast; ++k) {
    for (std::size_t i = kLast; i > k; --i) w[i] -= static_cast<double>(k) * w[i - 1];
  }
  for (std::size_t k = kLast; k-- > 0;) {
    for (std::size_t i = k + 1; i <= kLast; ++i) w[i] /= static_cast<double>(k + 1);
    for (std::size_t i = k; i < kLast; ++i) w[i] -= w[i + 1];
  }
  return w;
}

/// First sample of the stencil around a position: centred where the record allows.
std::size_t stencil_at(double position, std::size_t samples) {
  constexpr double kLeft = kEndPoints / 2 - 1;
  const double first = std::floor(position) - kLeft;
  return static_cast<std::size_t>(std::clamp(first, 0.0, static_cast<double>(samples - kEndPoints)));
}

}  // namespace

SpanSum SpanSum::whole_samples(std::size_t first, std::size_t count) {
  SpanSum span;
  span.begin = static_cast<double>(first);
  span.end = static_cast<double>(first + count);
  span.first = first;
  span.past = first + count;
  return span;
}

SpanSum SpanSum::between(double begin, double end, std::size_t samples) {
  base::require(
      samples >= 2 * kEndPoints && begin >= -1.0 && end > begin && end <= static_cast<double>(samples),
      "a span lies within its record");
  SpanSum span;
  span.begin = begin;
  span.end = end;
  span.head = stencil_at(begin, samples);
  span.tail = stencil_at(end, samples);
  span.first = span.head;
  span.past = span.tail + kEndPoints;
  const Weights tail = end_weights(end - static_cast<double>(span.tail));
  const Weights head = end_weights(static_cast<double>(span.head + kEndPoints - 1) - begin);
  for (std::size_t j = 0; j < kEndPoints; ++j) {
    span.tail_correction[j] = tail[j] - 1.0;
    span.head_correction[j] = head[kEndPoints - 1 - j] - 1.0;
  }
  return span;
}

}  // namespace loadstair::waveform
