#include "analysis/waveform/channel.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <string>

#include "analysis/base/number.h"
#include "analysis/waveform/lines.h"
#include "analysis/waveform/noise.h"

namespace loadstair::waveform {
namespace {

using base::Outcome;
using base::Refusal;

constexpr double kTwoPi = 2.0 * std::numbers::pi;

double degrees(std::complex<double> line) {
  const double angle = std::arg(line) * 180.0 / std::numbers::pi;
  return angle <= -180.0 ? 180.0 : angle;
}

/// Times the noise of a line: what noise alone exceeds with a probability of exp(-9).
constexpr double kLineOverNoise = 3.0;

void set_floor(ChannelResult& out, double line_noise, bool coherent) {
  // Beside noise a line is as good as the sums over the window are.
  const double computed = (coherent ? 1e-12 : 1e-8) * out.harmonics.front().rms;
  out.line_floor_rms = std::max(kLineOverNoise * line_noise, computed);
  for (Harmonic& harmonic : out.harmonics) {
    harmonic.below_floor = harmonic.order > 1 && harmonic.rms < out.line_floor_rms;
    if (harmonic.below_floor) out.orders_below_floor.push_back(harmonic.order);
  }
}

/// Harmonics, THD and what noise makes of them.
void set_distortion(ChannelResult& out, const Prepared& prepared,
                    const std::vector<std::complex<double>>& lines, const CycleWindow& window,
                    double interval_s) {
  const double frequency_hz = 1.0 / (window.period * interval_s);
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
  out.total_distortion_band_hz = 0.5 / interval_s;
  const Noise noise = noise_of(prepared, window, out.mean, lines, out.residual_rms, out.quantisation_step);
  out.noise_rms = noise.rms;
  const double line_noise = noise.line_rms;
  set_floor(out, line_noise, window.coherent);
  constexpr double kNoLine = 1e-9;
  if (!(first > std::max(kLineOverNoise * line_noise, kNoLine * out.rms.value))) {
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

/// A known delay out of the lines, and out of the phases as they are told.
void take_out_delay(ChannelAnalysis& analysis, double delay_s, double frequency_hz) {
  if (delay_s == 0.0) return;
  for (std::size_t h = 0; h < analysis.lines.size(); ++h) {
    analysis.lines[h] *= std::polar(1.0, kTwoPi * frequency_hz * static_cast<double>(h + 1) * delay_s);
    analysis.result.harmonics[h].phase_deg = degrees(analysis.lines[h]);
  }
}

Outcome<void> standard_decision(const ChannelResult& result) {
  if (!result.groups) return result.groups.refusal();
  const std::string place = "channel " + result.name;
  if (result.peak.lower_bound) return Refusal{place, "samples are clipped: no decision by a standard"};
  constexpr double kSynchronised = 3e-4;
  if (result.groups->synchronisation > kSynchronised) {
    return Refusal{place, "windows fit their cycles to " +
                              base::print_significant(100.0 * result.groups->synchronisation, 2) +
                              " %, IEC 61000-4-7 asks for 0.03 %: no decision by a standard"};
  }
  return {};
}

/// Clipped or coarse samples leave a peak in a band as unsure as the raw one.
void set_bound_in_band(ChannelResult& result) {
  if (!result.crest_factor_in_band || !result.crest_factor) return;
  result.crest_factor_in_band->lower_bound = result.crest_factor->lower_bound;
  const bool coarse = result.crest_factor->lower_bound && !result.peak.lower_bound;
  if (coarse) result.crest_factor_in_band->value -= 0.5 * result.quantisation_step / result.rms.value;
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
                                const Outcome<std::vector<GroupWindow>>& windows, double interval_s,
                                const AnalysisSettings& settings) {
  ChannelAnalysis out;
  ChannelResult& result = out.result;
  const std::string place = "channel " + channel.name;
  result.name = channel.name;
  result.unit = channel.unit;
  result.missing = prepared.missing;
  const bool clipped = prepared.clipped > 0;
  result.rms.lower_bound = result.ripple_rms.lower_bound = clipped;
  result.peak.lower_bound = result.peak_to_peak.lower_bound = clipped;
  set_levels(result, prepared, window);
  result.crest_factor_in_band = Refusal{place, "no band of the crest factor is declared"};
  if (window.cycles == 0) {
    const Refusal none{place, "no fundamental"};
    result.thd_f = result.thd_r = result.total_distortion = none;
    result.groups = none;
    result.standard_decision = none;
    result.residual_rms = result.ripple_rms.value;
    result.noise_rms = noise_of_direct(prepared);
    return out;
  }
  const double frequency_hz = 1.0 / (window.period * interval_s);
  const int resolved = static_cast<int>(std::ceil(window.period / 2.0)) - 1;
  const int orders = std::min(settings.harmonics, resolved);
  out.lines = line_amplitudes(prepared, window, result.mean, orders);
  // The noise is looked for in the samples as they are: the delay goes out of the lines afterwards.
  set_distortion(result, prepared, out.lines, window, interval_s);
  take_out_delay(out, channel.delay_s, frequency_hz);
  result.groups = group_harmonics(prepared, windows, interval_s, orders);
  result.standard_decision = standard_decision(result);
  if (settings.crest_band_hz) {
    result.crest_band_hz = *settings.crest_band_hz;
    result.crest_factor_in_band = crest_factor_in_band(prepared, window, interval_s, *settings.crest_band_hz);
    set_bound_in_band(result);
  }
  return out;
}

}  // namespace loadstair::waveform
