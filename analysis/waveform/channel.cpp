#include "analysis/waveform/channel.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>
#include <string>

#include "analysis/base/number.h"
#include "analysis/waveform/lines.h"
#include "analysis/waveform/transform.h"

namespace loadstair::waveform {
namespace {

using base::Outcome;
using base::Refusal;

constexpr double kTwoPi = 2.0 * std::numbers::pi;

/// Sums of one pass; deviations are from a pivot near the mean, so that small ripple on a large mean
/// survives.
struct Sums {
  double deviation = 0.0;
  double square = 0.0;
  double magnitude = 0.0;

  Sums& operator+=(const Sums& other) {
    deviation += other.deviation;
    square += other.square;
    magnitude += other.magnitude;
    return *this;
  }
  friend Sums operator*(double weight, const Sums& sums) {
    return {weight * sums.deviation, weight * sums.square, weight * sums.magnitude};
  }
};

void set_levels(ChannelResult& out, const Prepared& x, const SpanSum& span) {
  const double pivot = x[span.first];
  const Sums sums = span.sum([&](std::size_t k) {
    const double value = x[k];
    const double deviation = value - pivot;
    return Sums{deviation, deviation * deviation, std::abs(value)};
  });
  const double shift = sums.deviation / span.length();
  const double variance = std::max(0.0, sums.square / span.length() - shift * shift);
  out.mean = pivot + shift;
  out.ripple_rms.value = std::sqrt(variance);
  out.rms.value = std::sqrt(variance + out.mean * out.mean);
  out.mean_rectified = sums.magnitude / span.length();
}

void set_extremes(ChannelResult& out, const Prepared& x, const SpanSum& span) {
  const auto first = static_cast<std::size_t>(std::max(0.0, std::ceil(span.begin)));
  const std::size_t past = std::min(x.size(), static_cast<std::size_t>(std::ceil(span.end)));
  double low = std::numeric_limits<double>::infinity();
  double high = -low;
  double step = low;
  double before = x.samples[first];
  for (std::size_t k = first; k < past; ++k) {
    const double sample = x.samples[k];
    low = std::min(low, sample);
    high = std::max(high, sample);
    const double change = std::abs(sample - before);
    if (change > 0.0 && change < step) step = change;
    before = sample;
  }
  const double a = x.scale * low + x.offset;
  const double b = x.scale * high + x.offset;
  out.minimum = std::min(a, b);
  out.maximum = std::max(a, b);
  out.peak.value = std::max(std::abs(a), std::abs(b));
  out.peak_to_peak.value = std::abs(b - a);
  out.quantisation_step = std::isfinite(step) ? step * std::abs(x.scale) : 0.0;
}

double degrees(std::complex<double> line) {
  const double angle = std::arg(line) * 180.0 / std::numbers::pi;
  return angle <= -180.0 ? 180.0 : angle;
}

void set_ratios(ChannelResult& out, double samples_per_cycle) {
  const std::string place = "channel " + out.name;
  const bool clipped = out.peak.lower_bound;
  if (!(out.rms.value > 0.0)) {
    out.crest_factor = Refusal{place, "the signal is zero"};
    out.form_factor = Refusal{place, "the signal is zero"};
    return;
  }
  out.form_factor = Refusal{place, "the signal is zero"};
  if (out.mean_rectified > 0.0) out.form_factor = out.rms.value / out.mean_rectified;
  if (samples_per_cycle > 0.0 && samples_per_cycle < 2.0 * kLeastSamplesPerCrest) {
    out.crest_factor = Refusal{place, base::print_fixed(samples_per_cycle / 2.0, 1) +
                                          " samples on a crest; the peak needs 20: sample faster"};
  } else {
    out.crest_factor = Bounded{out.peak.value / out.rms.value, clipped};
  }
}

void set_distortion(ChannelResult& out, const std::vector<std::complex<double>>& lines,
                    const CycleWindow& window, double frequency_hz) {
  double lines_square = 0.0;
  double harmonics_square = 0.0;
  const double first = std::abs(lines[0]) / std::numbers::sqrt2;
  for (std::size_t h = 0; h < lines.size(); ++h) {
    const double rms = std::abs(lines[h]) / std::numbers::sqrt2;
    const int order = static_cast<int>(h) + 1;
    out.harmonics.push_back({order, frequency_hz * order, rms, 0.0, degrees(lines[h])});
    lines_square += rms * rms;
    if (h > 0) harmonics_square += rms * rms;
  }
  const double variance = out.ripple_rms.value * out.ripple_rms.value;
  out.residual_rms = std::sqrt(std::max(0.0, variance - lines_square));
  // White residual of RMS s over L samples gives a single line of RMS s sqrt(2/L).
  const double line_noise = out.residual_rms * std::sqrt(2.0 / window.span.length());
  constexpr double kNoLine = 1e-9;
  if (!(first > std::max(3.0 * line_noise, kNoLine * out.rms.value))) {
    out.thd_f = out.thd_r = out.total_distortion = Refusal{
        "channel " + out.name, "no fundamental at " + base::print_significant(frequency_hz, 5) + " Hz"};
    return;
  }
  for (Harmonic& harmonic : out.harmonics) harmonic.share = harmonic.rms / first;
  out.thd_f = std::sqrt(harmonics_square) / first;
  out.thd_r = std::sqrt(harmonics_square / lines_square);
  out.total_distortion = std::sqrt(std::max(0.0, variance - first * first)) / first;
  out.thd_floor = line_noise * std::sqrt(static_cast<double>(lines.size() - 1)) / first;
}

}  // namespace

double median(std::vector<double>& values) {
  const std::size_t middle = values.size() / 2;
  std::nth_element(values.begin(), values.begin() + static_cast<std::ptrdiff_t>(middle), values.end());
  const double upper = values[middle];
  if (values.size() % 2 == 1) return upper;
  return 0.5 *
         (upper + *std::max_element(values.begin(), values.begin() + static_cast<std::ptrdiff_t>(middle)));
}

ChannelAnalysis analyse_channel(const Channel& channel, const Prepared& prepared, const CycleWindow& window,
                                double interval_s, const AnalysisSettings& settings) {
  ChannelAnalysis out;
  ChannelResult& result = out.result;
  const std::string place = "channel " + channel.name;
  result.name = channel.name;
  result.unit = channel.unit;
  result.missing = prepared.missing;
  const bool clipped = prepared.clipped > 0;
  result.rms.lower_bound = result.ripple_rms.lower_bound = clipped;
  result.peak.lower_bound = result.peak_to_peak.lower_bound = clipped;
  set_levels(result, prepared, window.span);
  set_extremes(result, prepared, window.span);
  set_ratios(result, window.period);
  result.crest_factor_in_band = Refusal{place, "no band of the crest factor is declared"};
  if (window.cycles == 0) {
    const Refusal none{place, "no fundamental"};
    result.thd_f = result.thd_r = result.total_distortion = none;
    result.groups = none;
    result.residual_rms = result.ripple_rms.value;
    return out;
  }
  const double frequency_hz = 1.0 / (window.period * interval_s);
  const int resolved = static_cast<int>(std::ceil(window.period / 2.0)) - 1;
  const int orders = std::min(settings.harmonics, resolved);
  out.lines = line_amplitudes(prepared, window, result.mean, orders);
  for (std::size_t h = 0; h < out.lines.size() && channel.delay_s != 0.0; ++h) {
    out.lines[h] *= std::polar(1.0, kTwoPi * frequency_hz * static_cast<double>(h + 1) * channel.delay_s);
  }
  set_distortion(result, out.lines, window, frequency_hz);
  result.groups = group_harmonics(prepared, window, interval_s, orders);
  if (settings.crest_band_hz) {
    result.crest_factor_in_band = crest_factor_in_band(prepared, window, interval_s, *settings.crest_band_hz);
    if (result.crest_factor_in_band) result.crest_factor_in_band->lower_bound = clipped;
  }
  return out;
}

base::Outcome<Bounded> crest_factor_in_band(const Prepared& prepared, const CycleWindow& window,
                                            double interval_s, double band_hz) {
  if (window.period < 2.0 * kLeastSamplesPerCrest) {
    return Refusal{"crest factor", base::print_fixed(window.period / 2.0, 1) +
                                       " samples on a crest; the peak needs 20: sample faster"};
  }
  const double frequency_hz = 1.0 / (window.period * interval_s);
  if (!(band_hz >= frequency_hz)) return Refusal{"crest factor", "its band ends below the fundamental"};
  const std::size_t count = window.coherent
                                ? window.span.past - window.span.first
                                : good_size(static_cast<std::size_t>(std::ceil(window.span.length())));
  auto spectrum = real_transform(
      count, [&](double* into) { resample(prepared, window.span.begin, window.span.length(), count, into); });
  const double line_hz = frequency_hz / window.cycles;
  for (std::size_t k = 0; k < spectrum.size(); ++k) {
    if (static_cast<double>(k) * line_hz > band_hz) spectrum[k] = 0.0;
  }
  const std::vector<double> limited = real_inverse(std::move(spectrum), count);
  double square = 0.0;
  std::vector<double> peaks(static_cast<std::size_t>(window.cycles), 0.0);
  for (std::size_t k = 0; k < count; ++k) {
    square += limited[k] * limited[k];
    const std::size_t cycle = k * peaks.size() / count;
    peaks[cycle] = std::max(peaks[cycle], std::abs(limited[k]));
  }
  const double rms = std::sqrt(square / static_cast<double>(count));
  if (!(rms > 0.0)) return Refusal{"crest factor", "nothing is left in its band"};
  return Bounded{median(peaks) / rms, false};
}

}  // namespace loadstair::waveform
