#include <algorithm>
#include <cmath>
#include <limits>
#include <string>

#include "analysis/base/number.h"
#include "analysis/waveform/channel.h"
#include "analysis/waveform/noise.h"
#include "analysis/waveform/scatter.h"

namespace loadstair::waveform {
namespace {

using base::Refusal;

/// Sums of one pass; deviations are from a pivot near the mean, so that small ripple on a large mean
/// survives.
struct Sums {
  double deviation = 0.0;
  double square = 0.0;
  double magnitude = 0.0;
  double sign = 0.0;

  Sums& operator+=(const Sums& other) {
    deviation += other.deviation;
    square += other.square;
    magnitude += other.magnitude;
    sign += other.sign;
    return *this;
  }
  friend Sums operator*(double weight, const Sums& sums) {
    return {weight * sums.deviation, weight * sums.square, weight * sums.magnitude, weight * sums.sign};
  }
};

double sign_of(double value) {
  return value > 0.0 ? 1.0 : (value < 0.0 ? -1.0 : 0.0);
}

struct Level {
  double mean = 0.0, variance = 0.0, mean_rectified = 0.0, mean_sign = 0.0;
};

Level level_of(const Prepared& x, const SpanSum& span) {
  const double pivot = x[span.first];
  const Sums sums = span.sum([&](std::size_t k) {
    const double value = x[k];
    const double deviation = value - pivot;
    return Sums{deviation, deviation * deviation, std::abs(value), sign_of(value)};
  });
  const double shift = sums.deviation / span.length();
  return {pivot + shift, std::max(0.0, sums.square / span.length() - shift * shift),
          std::max(0.0, sums.magnitude / span.length()), std::clamp(sums.sign / span.length(), -1.0, 1.0)};
}

void set_scatter(ChannelResult& out, const Prepared& x, const CycleWindow& window) {
  std::vector<double> mean, rms;
  for (const SpanSum& part : parts_of(window, x.size())) {
    const Level level = level_of(x, part);
    mean.push_back(level.mean);
    rms.push_back(std::sqrt(level.variance + level.mean * level.mean));
  }
  const Scatter of_mean = scatter_of(mean);
  const Scatter of_rms = scatter_of(rms);
  out.mean_standard_uncertainty = of_mean.standard_uncertainty;
  out.rms_standard_uncertainty = of_rms.standard_uncertainty;
  out.degrees_of_freedom = std::min(of_mean.degrees_of_freedom, of_rms.degrees_of_freedom);
}

struct Range {
  std::size_t first = 0, past = 0;
};

Range whole_samples_of(const Prepared& x, const SpanSum& span) {
  return {static_cast<std::size_t>(std::max(0.0, std::ceil(span.begin))),
          std::min(x.size(), static_cast<std::size_t>(std::ceil(span.end)))};
}

void set_extremes(ChannelResult& out, const Prepared& x, const Range& range) {
  double low = std::numeric_limits<double>::infinity();
  double high = -low;
  for (std::size_t k = range.first; k < range.past; ++k) {
    low = std::min(low, x.samples[k]);
    high = std::max(high, x.samples[k]);
  }
  const double a = x.scale * low + x.offset;
  const double b = x.scale * high + x.offset;
  out.minimum = std::min(a, b);
  out.maximum = std::max(a, b);
  out.peak.value = std::max(std::abs(a), std::abs(b));
  out.peak_to_peak.value = std::abs(b - a);
}

/// Fewer steps than this from the mean to the peak leave its height unsure.
constexpr double kLeastStepsToPeak = 20.0;

void set_ratios(ChannelResult& out, double samples_per_cycle) {
  const std::string place = "channel " + out.name;
  const bool clipped = out.peak.lower_bound;
  out.crest_factor = Refusal{place, "the signal is zero"};
  out.form_factor = Refusal{place, "the signal is zero"};
  if (!(out.rms.value > 0.0)) return;
  if (out.mean_rectified > 0.0) out.form_factor = out.rms.value / out.mean_rectified;
  if (samples_per_cycle > 0.0 && samples_per_cycle < 2.0 * kLeastSamplesPerCrest) {
    out.crest_factor = Refusal{place, base::print_fixed(samples_per_cycle / 2.0, 1) +
                                          " samples on a crest; the peak needs 20: sample faster"};
    return;
  }
  const double step = out.quantisation_step;
  const double above_mean = std::max(out.maximum - out.mean, out.mean - out.minimum);
  const bool coarse = samples_per_cycle > 0.0 && step > 0.0 && above_mean < kLeastStepsToPeak * step;
  const double peak = out.peak.value - (coarse ? 0.5 * step : 0.0);
  out.crest_factor = Bounded{peak / out.rms.value, clipped || coarse};
}

}  // namespace

void set_levels(ChannelResult& out, const Prepared& x, const CycleWindow& window) {
  const Level level = level_of(x, window.span);
  out.mean = level.mean;
  out.ripple_rms.value = std::sqrt(level.variance);
  out.rms.value = std::sqrt(level.variance + level.mean * level.mean);
  out.mean_rectified = level.mean_rectified;
  out.mean_sign = level.mean_sign;
  const Range range = whole_samples_of(x, window.span);
  set_extremes(out, x, range);
  const Steps steps = steps_of(x, range.first, range.past);
  // An alternating record on three levels is a switched signal, whose jumps say nothing of the converter.
  constexpr int kSwitchedLevels = 3;
  const bool told = window.cycles == 0 || steps.levels > kSwitchedLevels;
  out.quantisation_step = told ? steps.step * std::abs(x.scale) : 0.0;
  set_scatter(out, x, window);
  set_ratios(out, window.period);
}

}  // namespace loadstair::waveform
