#include "analysis/waveform/fundamental.h"

#include <algorithm>
#include <cmath>
#include <complex>
#include <numbers>
#include <vector>

#include "analysis/waveform/largest_line.h"
#include "analysis/waveform/lines.h"
#include "analysis/waveform/sine_fit.h"

namespace loadstair::waveform {
namespace {

constexpr double kTwoPi = 2.0 * std::numbers::pi;
constexpr std::size_t kSearchSamples = 65536;
// A window is snapped to whole samples within 5 standard uncertainties, at least a millionth and at most a
// quarter of a sample (or 0.0001 cycle where that is more): the record cannot tell the difference, and plain
// sums are then exact.
constexpr double kSnapDeviations = 5.0;
constexpr double kLeastSnap = 1e-6;
constexpr double kMostSnap = 0.25;
constexpr double kMostSnapCycles = 1e-4;

std::vector<double> block_means(const Prepared& channel, std::size_t block) {
  std::vector<double> means(channel.size() / block);
  for (std::size_t i = 0; i < means.size(); ++i) {
    double sum = 0.0;
    for (std::size_t k = i * block; k < (i + 1) * block; ++k) sum += channel[k];
    means[i] = sum / static_cast<double>(block);
  }
  return means;
}

/// DFT peak, then the sine fit where it agrees with the peak to half a line.
base::Outcome<Line> search(const Prepared& channel, std::size_t block, double low, double high) {
  const std::vector<double> samples = block_means(channel, block);
  const double scale = static_cast<double>(block);
  base::Outcome<Line> line = find_largest_line(samples, low * scale, std::min(0.5, high * scale));
  if (!line) return line;
  const auto fit = fit_sine_and_frequency(samples, line->frequency);
  if (fit && std::abs(fit->frequency - line->frequency) * static_cast<double>(samples.size()) < 0.5) {
    line->frequency = fit->frequency;
  }
  line->frequency /= scale;
  return line;
}

/// Where a window of this length starts: at the first sample, or half outside on both sides.
double begin_of(double length, std::size_t samples) {
  const double last = static_cast<double>(samples) - 1.0;
  return length <= last ? 0.0 : 0.5 * (last - length);
}

struct PhaseSlope {
  double cycles_per_cycle = 0.0;
  double standard_uncertainty = 0.0;
};

/// Least-squares slope of the fundamental's phase over cycles that start `spacing` samples apart; three or
/// more give an uncertainty.
PhaseSlope phase_slope(const Prepared& channel, double begin, double period, double spacing, int cycles) {
  std::vector<double> phase(static_cast<std::size_t>(cycles));
  double turns = 0.0;
  for (std::size_t c = 0; c < phase.size(); ++c) {
    const double start = begin + static_cast<double>(c) * spacing;
    const double stop = std::min(start + period, static_cast<double>(channel.size()));
    const SpanSum span = SpanSum::between(start, stop, channel.size());
    phase[c] = std::arg(fundamental_sum(channel, span, period)) / kTwoPi + turns;
    if (c > 0) {
      const double jump = std::round(phase[c] - phase[c - 1]);
      phase[c] -= jump;
      turns -= jump;
    }
  }
  const double n = static_cast<double>(cycles);
  double mean = 0.0;
  for (const double value : phase) mean += value / n;
  double cross = 0.0;
  for (std::size_t c = 0; c < phase.size(); ++c)
    cross += (static_cast<double>(c) - 0.5 * (n - 1.0)) * (phase[c] - mean);
  const double square = n * (n * n - 1.0) / 12.0;
  PhaseSlope out{cross / square * period / spacing, 0.0};
  if (cycles < 3) return out;
  double rest = 0.0;
  for (std::size_t c = 0; c < phase.size(); ++c) {
    const double residual =
        phase[c] - mean - out.cycles_per_cycle * (static_cast<double>(c) - 0.5 * (n - 1.0));
    rest += residual * residual;
  }
  out.standard_uncertainty = std::sqrt(rest / (n - 2.0) / square);
  return out;
}

/// Of the whole record's cycles. A record of less than two cycles is covered by two that overlap.
PhaseSlope phase_slope(const Prepared& channel, double frequency, int whole_cycles_inside) {
  const double period = 1.0 / frequency;
  const int cycles = std::max(2, whole_cycles_inside);
  const double begin = whole_cycles_inside < 2 ? -0.5 : begin_of(period * cycles, channel.size());
  const double spacing = whole_cycles_inside < 2 ? static_cast<double>(channel.size()) - period : period;
  return phase_slope(channel, begin, period, spacing, cycles);
}

int cycles_within(double frequency, std::size_t samples, double snap) {
  return static_cast<int>(std::min(1e9, std::floor((static_cast<double>(samples) + snap) * frequency)));
}

}  // namespace

base::Outcome<FoundFundamental> find_fundamental(const Prepared& channel, double low, double high) {
  const std::size_t block = std::max<std::size_t>(1, channel.size() / kSearchSamples);
  base::Outcome<Line> line = search(channel, block, low, high);
  constexpr double kMostOfMeans = 0.1;  // beyond it block means attenuate the line
  if (block > 1 && (!line || line->frequency * static_cast<double>(block) > kMostOfMeans)) {
    line = search(channel, 1, low, high);
  }
  if (!line) return line.refusal();
  FoundFundamental found{line->frequency, 0.0, line->share};
  constexpr double kLeastPeriod = 8.0;
  constexpr double kLeastCycles = 1.2;
  double last_step = 1.0;
  for (int iteration = 0; iteration < 8; ++iteration) {
    const int cycles = cycles_within(found.frequency, channel.size(), 0.5);
    const bool overlapping_fit = found.frequency * static_cast<double>(channel.size()) >= kLeastCycles;
    if (!overlapping_fit || found.frequency * kLeastPeriod > 1.0) break;
    const PhaseSlope slope = phase_slope(channel, found.frequency, cycles);
    if (!(std::abs(slope.cycles_per_cycle) < last_step)) break;  // no longer shrinking: rounding or noise
    last_step = std::abs(slope.cycles_per_cycle);
    const double moved = found.frequency * (1.0 + slope.cycles_per_cycle);
    // Beyond the line's own width the phase belongs to something else; the line's frequency stays.
    if (!(std::abs(moved - line->frequency) * static_cast<double>(channel.size()) < 1.0)) break;
    found.standard_uncertainty = slope.standard_uncertainty * found.frequency;
    found.frequency = moved;
    if (last_step < 1e-15) break;
  }
  return found;
}

LocalFrequency local_frequency(const Prepared& channel, double begin, double period, int cycles) {
  const PhaseSlope slope = phase_slope(channel, begin, period, period, cycles);
  return {(1.0 + slope.cycles_per_cycle) / period, slope.standard_uncertainty / period};
}

CycleWindow whole_cycles(const FoundFundamental& fundamental, std::size_t samples) {
  const double relative = fundamental.standard_uncertainty / fundamental.frequency;
  const double most = std::max(kMostSnap, kMostSnapCycles / fundamental.frequency);
  const double snap = std::clamp(kSnapDeviations * relative * static_cast<double>(samples), kLeastSnap, most);
  CycleWindow window;
  window.cycles = cycles_within(fundamental.frequency, samples, snap);
  if (window.cycles < 1) return window;
  const double length = window.cycles / fundamental.frequency;
  const double whole = std::round(length);
  window.coherent = std::abs(length - whole) <= snap && whole <= static_cast<double>(samples);
  if (window.coherent) {
    window.span = SpanSum::whole_samples(0, static_cast<std::size_t>(whole));
  } else {
    const double begin = begin_of(length, samples);
    window.span = SpanSum::between(begin, begin + length, samples);
  }
  window.period = window.span.length() / window.cycles;
  return window;
}

}  // namespace loadstair::waveform
