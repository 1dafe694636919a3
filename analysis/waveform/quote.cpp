#include "analysis/waveform/quote.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <string>
#include <vector>

#include "analysis/waveform/quote_sources.h"

namespace loadstair::waveform {
namespace {

using base::Refusal;
using estimate::Distribution;
using estimate::Estimate;
using estimate::Quoted;

double thd_at(const ChannelResult& channel, const ChannelAccuracy& accuracy, double moved) {
  double square = 0.0;
  double first = 0.0;
  for (const Harmonic& line : channel.harmonics) {
    const double gain =
        line.below_floor ? 1.0 : std::abs(undone_low_pass(accuracy, line.frequency_hz, true, moved));
    if (line.order == 1) {
      first = line.rms * gain;
    } else {
      square += line.rms * gain * line.rms * gain;
    }
  }
  return std::sqrt(square) / first;
}

Quoted quote_thd(const ChannelResult& channel, const ChannelErrors& errors,
                 const estimate::Occasion& occasion) {
  if (!channel.thd_f) return channel.thd_f.refusal();
  const Estimate value =
      errors.accuracy.bandwidth_hz
          ? with_bandwidth(errors, [&](double moved) { return thd_at(channel, errors.accuracy, moved); })
          : Estimate{*channel.thd_f};
  const double first = channel.harmonics.front().rms;
  return value + own_error(occasion, "noise of " + channel.name, channel.thd_floor, Distribution::normal) +
         shared_error(errors.accuracy, "linearity, distortion", errors.linearity / first, occasion);
}

/// What the low-pass may have taken off a peak, all lines at their worst: half-width.
double lost_from_peak(const ChannelResult& channel, const ChannelAccuracy& accuracy) {
  if (!accuracy.bandwidth_hz) return 0.0;
  double sum = 0.0;
  const double narrowest = std::max(0.01, 1.0 - accuracy.bandwidth_tolerance);
  for (const Harmonic& line : channel.harmonics) {
    if (line.below_floor) continue;
    sum += std::numbers::sqrt2 * line.rms *
           (std::abs(undone_low_pass(accuracy, line.frequency_hz, true, narrowest)) - 1.0);
  }
  return sum;
}

void quote_levels(ChannelQuote& out, const ChannelResult& channel, const ChannelErrors& errors,
                  const estimate::Occasion& occasion) {
  const double rms = channel.rms.value;
  const double mean = channel.mean;
  const Estimate scatter = own_scatter(occasion, "scatter of the mean of " + channel.name,
                                       channel.mean_standard_uncertainty, channel.degrees_of_freedom);
  const Estimate steps =
      own_error(occasion, "quantisation of the mean of " + channel.name,
                quantisation_of_mean(channel.quantisation_step, channel.noise_rms, channel.ripple_rms.value),
                Distribution::rectangular);
  out.mean = estimate::combine(
      mean,
      {{errors.gain, mean}, {errors.offset, 1.0}, {errors.bent_mean, 1.0}, {scatter, 1.0}, {steps, 1.0}});
  const Estimate rms_scatter = own_scatter(occasion, "scatter of the RMS of " + channel.name,
                                           channel.rms_standard_uncertainty, channel.degrees_of_freedom);
  const double rms_per_offset = rms > 0.0 ? mean / rms : 0.0;
  // Where the mean is near zero an offset adds its square: offset^2 (1 - mean^2/RMS^2)/(2 RMS) at most.
  const double offset = errors.accuracy.offset;
  const double squared =
      rms > 0.0 ? 0.5 * offset * offset * (1.0 - rms_per_offset * rms_per_offset) / rms : offset;
  const Estimate second = shared_error(errors.accuracy, "offset, squared", squared, occasion);
  const Estimate level = with_bandwidth(errors, [&](double moved) {
    return errors.accuracy.bandwidth_hz ? std::sqrt(corrected_square(channel, errors.accuracy, moved)) : rms;
  });
  out.rms = estimate::combine(level.value(), {{level, 1.0},
                                              {errors.gain, level.value()},
                                              {errors.offset, rms_per_offset},
                                              {second, 1.0},
                                              {errors.bent_rms, 1.0},
                                              {rms_scatter, 1.0},
                                              {steps, std::abs(rms_per_offset)}});
  const double ripple = channel.ripple_rms.value;
  const Estimate ripple_level = with_bandwidth(errors, [&](double moved) {
    return errors.accuracy.bandwidth_hz
               ? std::sqrt(std::max(0.0, corrected_square(channel, errors.accuracy, moved) - mean * mean))
               : ripple;
  });
  const Estimate bent = shared_error(errors.accuracy, "linearity, ripple", errors.linearity, occasion);
  out.ripple_rms = estimate::combine(ripple_level.value(),
                                     {{ripple_level, 1.0}, {errors.gain, ripple_level.value()}, {bent, 1.0}});
}

void quote_shape(ChannelQuote& out, const ChannelResult& channel, const ChannelErrors& errors,
                 const estimate::Occasion& occasion) {
  const double rms = channel.rms.value;
  const double rms_per_offset = rms > 0.0 ? channel.mean / rms : 0.0;
  const Estimate step = own_error(occasion, "quantisation of " + channel.name,
                                  channel.quantisation_step / std::sqrt(12.0), Distribution::rectangular);
  const Estimate lost =
      shared_error(errors.accuracy, "bandwidth, peak", lost_from_peak(channel, errors.accuracy), occasion);
  const double side = std::abs(channel.maximum) >= std::abs(channel.minimum) ? 1.0 : -1.0;
  out.peak = estimate::combine(channel.peak.value, {{errors.gain, channel.peak.value},
                                                    {errors.offset, side},
                                                    {errors.bent_peak, 1.0},
                                                    {lost, 1.0},
                                                    {step, 1.0}});
  const auto crest_of = [&](const base::Outcome<Bounded>& crest) -> Quoted {
    if (!crest) return crest.refusal();
    if (crest->lower_bound) {
      return Refusal{"channel " + channel.name, "only a lower bound is known: too few steps up to the peak"};
    }
    return estimate::combine(crest->value, {{errors.offset, side / rms - crest->value * rms_per_offset / rms},
                                            {errors.bent_peak, 1.0 / rms},
                                            {errors.bent_rms, -crest->value / rms},
                                            {lost, 1.0 / rms},
                                            {step, 1.0 / rms}});
  };
  out.crest_factor = crest_of(channel.crest_factor);
  out.crest_factor_in_band = crest_of(channel.crest_factor_in_band);
  if (!channel.form_factor) {
    out.form_factor = channel.form_factor.refusal();
    return;
  }
  // The rectified mean moves with the offset by the mean of the sign: 1 where the wave has one sign, 0 where
  // it is above zero for as long as below.
  const double form = *channel.form_factor;
  const double rectified = channel.mean_rectified;
  out.form_factor =
      estimate::combine(form, {{errors.offset, (rms_per_offset - form * channel.mean_sign) / rectified},
                               {errors.bent_rms, 1.0 / rectified},
                               {errors.bent_rectified, -form / rectified},
                               {lost, form / rms}});
}

ChannelQuote quote_channel(const ChannelResult& channel, const ChannelErrors& errors,
                           const estimate::Occasion& occasion) {
  ChannelQuote out;
  if (channel.peak.lower_bound) {
    const Refusal bound = only_a_bound(channel.name);
    out.mean = out.rms = out.ripple_rms = out.peak = bound;
    out.crest_factor = out.crest_factor_in_band = out.form_factor = out.thd_f = bound;
    return out;
  }
  out.thd_f = quote_thd(channel, errors, occasion);
  quote_levels(out, channel, errors, occasion);
  quote_shape(out, channel, errors, occasion);
  return out;
}

Quoted quote_frequency(const WaveformResult& result, const CaptureAccuracy& accuracy) {
  if (!result.fundamental) return result.fundamental.refusal();
  if (!accuracy.timebase)
    return Refusal{"", "uncertainty not known: no accuracy of the time base is declared"};
  constexpr int kLeastCycles = 3;
  if (result.window.cycles < kLeastCycles) {
    return Refusal{"frequency", "uncertainty not known: fewer than 3 whole cycles show no scatter"};
  }
  const double f = result.fundamental->fitted_hz;
  const Estimate timebase = lasting_error(accuracy.timebase_owner, "timebase", *accuracy.timebase);
  const Estimate scatter =
      own_scatter(accuracy.occasion, "scatter of the phase", result.fundamental->standard_uncertainty_hz,
                  static_cast<double>(result.window.cycles) - 2.0);
  return estimate::combine(f, {{timebase, f}, {scatter, 1.0}});
}

}  // namespace

double quantisation_of_mean(double step, double noise_rms, double alternating_rms) {
  if (!(step > 0.0)) return 0.0;
  constexpr double kPi = std::numbers::pi;
  const double spread = kPi * noise_rms / step;
  double left = std::exp(-2.0 * spread * spread);
  const double amplitude = std::numbers::sqrt2 * alternating_rms;
  // Envelope of J0(z): sqrt(2/(pi z)), z = 2 pi A/q.
  if (amplitude > step) left = std::min(left, std::sqrt(step / (kPi * kPi * amplitude)));
  return step / std::sqrt(12.0) * left;
}

WaveformQuote quote(const WaveformResult& result, const CaptureAccuracy& accuracy) {
  WaveformQuote out;
  out.channels.resize(result.channels.size());
  const auto declared = [&](std::size_t c) {
    return c < accuracy.channels.size() && accuracy.channels[c].has_value();
  };
  const auto errors = [&](std::size_t c) {
    return errors_of(*accuracy.channels[c], result.channels[c], accuracy.occasion);
  };
  for (std::size_t c = 0; c < result.channels.size(); ++c) {
    if (declared(c)) out.channels[c] = quote_channel(result.channels[c], errors(c), accuracy.occasion);
  }
  out.frequency_hz = quote_frequency(result, accuracy);
  if (!result.power) {
    const Refusal reason = result.power.refusal();
    out.power = {reason, reason, reason, reason, reason, reason};
  } else if (result.voltage && result.current && declared(*result.voltage) && declared(*result.current)) {
    out.power = quote_power(result, errors(*result.voltage), errors(*result.current), accuracy);
  }
  return out;
}

}  // namespace loadstair::waveform
