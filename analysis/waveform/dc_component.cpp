#include "analysis/waveform/dc_component.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <string>
#include <vector>

#include "analysis/base/number.h"
#include "analysis/waveform/noise.h"
#include "analysis/waveform/prepare.h"
#include "analysis/waveform/quote_sources.h"
#include "analysis/waveform/scatter.h"

namespace loadstair::waveform {
namespace {

using base::Outcome;
using base::Refusal;
using estimate::Estimate;

Refusal undecided(const ChannelResult& channel, const std::string& why) {
  return {"channel " + channel.name, "direct component undecided: " + why};
}

std::optional<Refusal> unfit(const ChannelResult& channel, const Zeros& zeros) {
  if (!zeros.before && !zeros.after) return undecided(channel, "no zero before and none after the capture");
  if (!zeros.before) return undecided(channel, "no zero before the capture");
  if (!zeros.after) return undecided(channel, "no zero after the capture");
  for (const double number : {zeros.before->value, zeros.before->standard_uncertainty, zeros.after->value,
                              zeros.after->standard_uncertainty}) {
    if (!std::isfinite(number)) return undecided(channel, "a zero is not a number");
  }
  if (channel.peak.lower_bound) return undecided(channel, "samples are clipped");
  if (channel.degrees_of_freedom == 0) {
    return undecided(channel, "fewer than 3 whole cycles, so that the scatter of the mean is not known");
  }
  return std::nullopt;
}

Estimate zero_estimate(const ZeroReading& zero, const estimate::Occasion& occasion, const std::string& name,
                       double step) {
  const Estimate scatter =
      own_scatter(occasion, name + ": scatter", zero.standard_uncertainty, zero.degrees_of_freedom);
  const Estimate steps =
      own_error(occasion, name + ": quantisation", quantisation_of_mean(step, zero.noise_rms, 0.0),
                estimate::Distribution::rectangular);
  return estimate::combine(zero.value, {{scatter, 1.0}, {steps, 1.0}});
}

}  // namespace

Outcome<ZeroReading> zero_of(const Channel& channel) {
  constexpr std::size_t kLeastSamples = 16;
  const std::string place = "zero of " + channel.name;
  if (channel.values.size() < kLeastSamples) return Refusal{place, "16 samples at least are needed"};
  const Outcome<Prepared> ready = prepare(channel);
  if (!ready) return Refusal{place, ready.refusal().reason};
  if (ready->clipped > 0) return Refusal{place, "samples are clipped: this is no zero"};
  CycleWindow window;
  window.span = SpanSum::whole_samples(0, ready->size());
  const double pivot = (*ready)[0];
  const auto mean_over = [&](const SpanSum& span) {
    return pivot + span.mean([&](std::size_t k) { return (*ready)[k] - pivot; });
  };
  std::vector<double> means;
  for (const SpanSum& part : parts_of(window, ready->size())) means.push_back(mean_over(part));
  const Scatter scatter = scatter_of(means);
  const double noise = noise_of_direct(*ready);
  ZeroReading out{mean_over(window.span), scatter.standard_uncertainty,
                  static_cast<double>(scatter.degrees_of_freedom), noise,
                  steps_of(*ready, 0, ready->size()).step * std::abs(channel.scale)};
  if (scatter.degrees_of_freedom == 0) {
    // Too short for parts: the noise as if white.
    out.standard_uncertainty = noise / std::sqrt(static_cast<double>(ready->size()));
    out.degrees_of_freedom = static_cast<double>(ready->size()) - 3.0;
  }
  return out;
}

Outcome<DcComponent> dc_component(const ChannelResult& channel, const Zeros& zeros,
                                  const std::optional<ChannelAccuracy>& accuracy,
                                  const estimate::Occasion& occasion, std::optional<double> rated) {
  if (const auto reason = unfit(channel, zeros)) return *reason;
  if (!accuracy) return kUncertaintyNotKnown;
  const ZeroReading& before = *zeros.before;
  const ZeroReading& after = *zeros.after;
  const double step = channel.quantisation_step;
  // A zero at rest shows no steps; the capture's then serve.
  const auto step_of = [&](const ZeroReading& zero) {
    return zero.quantisation_step > 0.0 ? zero.quantisation_step : step;
  };
  DcComponent out;
  out.mean = channel.mean;
  out.zero = 0.5 * (before.value + after.value);
  out.drift = after.value - before.value;
  const double value = out.mean - out.zero;
  const std::string of = " of " + channel.name;
  const Estimate first = zero_estimate(before, occasion, "zero before" + of, step_of(before));
  const Estimate last = zero_estimate(after, occasion, "zero after" + of, step_of(after));
  const Estimate drift =
      own_error(occasion, "drift of the zero" + of, 0.5 * std::abs(out.drift) / std::numbers::sqrt3,
                estimate::Distribution::rectangular);
  const Estimate scatter = own_scatter(occasion, "scatter of the mean" + of,
                                       channel.mean_standard_uncertainty, channel.degrees_of_freedom);
  const Estimate steps = own_error(occasion, "quantisation of the mean" + of,
                                   quantisation_of_mean(step, channel.noise_rms, channel.ripple_rms.value),
                                   estimate::Distribution::rectangular);
  const Estimate gain = gain_error(*accuracy, occasion);
  out.value = estimate::combine(
      value, {{gain, value}, {first, -0.5}, {last, -0.5}, {drift, 1.0}, {scatter, 1.0}, {steps, 1.0}});
  if (!rated) {
    out.share_of_rated = Refusal{"channel " + channel.name, "no rated current is declared"};
  } else if (!(*rated > 0.0) || !std::isfinite(*rated)) {
    out.share_of_rated = Refusal{"channel " + channel.name, "the rated current must be above zero"};
  } else {
    out.share_of_rated = out.value / *rated;
  }
  return out;
}

}  // namespace loadstair::waveform
