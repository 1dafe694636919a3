#include "analysis/waveform/scatter.h"

#include <algorithm>
#include <cmath>

#include "analysis/series/correlation.h"

namespace loadstair::waveform {

std::vector<SpanSum> parts_of(const CycleWindow& window, std::size_t samples) {
  std::vector<SpanSum> parts;
  if (window.cycles == 0) {
    constexpr std::size_t kParts = 20;
    constexpr std::size_t kLeastInPart = 8;
    const std::size_t count = std::min(kParts, samples / kLeastInPart);
    for (std::size_t p = 0; p < count; ++p) {
      const std::size_t first = p * samples / count;
      parts.push_back(SpanSum::whole_samples(first, (p + 1) * samples / count - first));
    }
    return parts;
  }
  const double whole = std::round(window.period);
  const bool on_samples = window.coherent && std::abs(window.period - whole) < 1e-9;
  const auto per_cycle = static_cast<std::size_t>(whole);
  for (int c = 0; c < window.cycles; ++c) {
    if (on_samples) {
      parts.push_back(
          SpanSum::whole_samples(window.span.first + static_cast<std::size_t>(c) * per_cycle, per_cycle));
      continue;
    }
    const double begin = window.span.begin + window.period * c;
    parts.push_back(
        SpanSum::between(begin, std::min(begin + window.period, static_cast<double>(samples)), samples));
  }
  return parts;
}

Scatter scatter_of(std::span<const double> by_part) {
  constexpr std::size_t kLeastParts = 3;
  if (by_part.size() < kLeastParts) return {};
  const double n = static_cast<double>(by_part.size());
  double mean = 0.0;
  for (const double value : by_part) mean += value / n;
  std::vector<double> residual;
  double square = 0.0;
  for (const double value : by_part) {
    residual.push_back(value - mean);
    square += residual.back() * residual.back();
  }
  const double effective = std::clamp(series::integrated_correlation(residual).effective_count, 2.0, n);
  // The scatter itself is that of correlated values: Zieba 2010, as in the averaging windows of a run.
  return {std::sqrt(square / (n * (effective - 1.0))),
          std::max(1, static_cast<int>(std::floor(effective)) - 1)};
}

}  // namespace loadstair::waveform
