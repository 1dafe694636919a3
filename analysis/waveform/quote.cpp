#include "analysis/waveform/quote.h"

#include <cmath>
#include <numbers>
#include <string>
#include <vector>

namespace loadstair::waveform {
namespace {

using base::Refusal;
using estimate::Estimate;
using estimate::Partial;
using estimate::Quoted;

constexpr double kTwoPi = 2.0 * std::numbers::pi;

/// Errors of one channel as estimates about nothing: relative gain, offset in the channel's unit, delay in s.
struct ChannelErrors {
  Estimate gain{0.0};
  Estimate offset{0.0};
  Estimate delay{0.0};
};

std::string called(const estimate::Owner& owner, const std::string& what) {
  return owner.instrument + (owner.range.empty() ? "" : " on " + owner.range) + ": " + what;
}

Estimate shared(const ChannelAccuracy& accuracy, const std::string& part, double half_width,
                const estimate::Occasion& occasion) {
  const double u = half_width / std::numbers::sqrt3;
  const auto source = [&](std::string key) {
    return estimate::make_type_b(std::move(key), called(accuracy.owner, part),
                                 estimate::Distribution::rectangular, accuracy.owner);
  };
  namespace key = estimate::key;
  return Estimate{0.0,
                  {{source(key::meter(accuracy.owner, part)), u * std::sqrt(accuracy.shares.fixed)},
                   {source(key::meter_in_run(accuracy.owner, part, occasion.run)),
                    u * std::sqrt(accuracy.shares.per_run)},
                   {source(key::meter_at_level(accuracy.owner, part, occasion.run, occasion.level)),
                    u * std::sqrt(accuracy.shares.per_level)}}};
}

ChannelErrors errors_of(const ChannelAccuracy& accuracy, const estimate::Occasion& occasion) {
  ChannelErrors out;
  if (accuracy.gain > 0.0) out.gain = shared(accuracy, "gain", accuracy.gain, occasion);
  if (accuracy.offset > 0.0) out.offset = shared(accuracy, "offset", accuracy.offset, occasion);
  if (accuracy.delay_s > 0.0) {
    out.delay = Estimate{
        0.0,
        estimate::make_type_b(estimate::key::meter(accuracy.owner, "delay"), called(accuracy.owner, "delay"),
                              estimate::Distribution::rectangular, accuracy.owner),
        accuracy.delay_s / std::numbers::sqrt3};
  }
  return out;
}

/// An error of this record alone.
Estimate own(const estimate::Occasion& occasion, const std::string& part, double u,
             estimate::Distribution shape) {
  return Estimate{
      0.0, estimate::make_type_b(estimate::key::window(occasion.run, occasion.level, part), part, shape), u};
}

Refusal only_a_bound(const std::string& channel) {
  return {"channel " + channel, "only a lower bound is known: samples are clipped"};
}

ChannelQuote quote_channel(const ChannelResult& channel, const ChannelErrors& errors,
                           const estimate::Occasion& occasion) {
  ChannelQuote out;
  const double rms = channel.rms.value;
  const bool clipped = channel.peak.lower_bound;
  out.thd_f = channel.thd_f ? Quoted{*channel.thd_f + own(occasion, "noise of " + channel.name,
                                                          channel.thd_floor, estimate::Distribution::normal)}
                            : Quoted{channel.thd_f.refusal()};
  if (clipped) {
    const Refusal bound = only_a_bound(channel.name);
    out.mean = out.rms = out.ripple_rms = out.peak = out.crest_factor = out.form_factor = out.thd_f = bound;
    return out;
  }
  out.mean = estimate::combine(channel.mean, {{errors.gain, channel.mean}, {errors.offset, 1.0}});
  const double rms_per_offset = rms > 0.0 ? channel.mean / rms : 0.0;
  out.rms = estimate::combine(rms, {{errors.gain, rms}, {errors.offset, rms_per_offset}});
  out.ripple_rms = estimate::combine(channel.ripple_rms.value, {{errors.gain, channel.ripple_rms.value}});
  const Estimate step = own(occasion, "quantisation of " + channel.name,
                            channel.quantisation_step / std::sqrt(12.0), estimate::Distribution::rectangular);
  const double side = std::abs(channel.maximum) >= std::abs(channel.minimum) ? 1.0 : -1.0;
  out.peak = estimate::combine(channel.peak.value,
                               {{errors.gain, channel.peak.value}, {errors.offset, side}, {step, 1.0}});
  if (channel.crest_factor) {
    const double crest = channel.crest_factor->value;
    out.crest_factor = estimate::combine(
        crest, {{errors.offset, side / rms - crest * rms_per_offset / rms}, {step, 1.0 / rms}});
  } else {
    out.crest_factor = channel.crest_factor.refusal();
  }
  if (channel.form_factor) {
    // The rectified mean moves with the offset by mean(sign): 1 where the wave has one sign, 0 where it is
    // symmetric.
    const double form = *channel.form_factor;
    const double rectified_per_offset = channel.mean / channel.mean_rectified;
    out.form_factor = estimate::combine(
        form, {{errors.offset, (rms_per_offset - form * rectified_per_offset) / channel.mean_rectified}});
  } else {
    out.form_factor = channel.form_factor.refusal();
  }
  return out;
}

/// d P / d delay of the voltage: minus the sum over orders of 2 pi f_h Q_h; of the current, the opposite.
double power_per_delay(const Power& power, double frequency_hz) {
  if (!power.fundamental) return 0.0;
  double sum = 0.0;
  const auto& reactive = power.fundamental->reactive_by_order_var;
  for (std::size_t h = 0; h < reactive.size(); ++h)
    sum -= kTwoPi * frequency_hz * static_cast<double>(h + 1) * reactive[h];
  return sum;
}

PowerQuote quote_power(const WaveformResult& result, const ChannelResult& v, const ChannelResult& i,
                       const ChannelErrors& v_errors, const ChannelErrors& i_errors) {
  PowerQuote out;
  const Power& power = *result.power;
  if (v.peak.lower_bound || i.peak.lower_bound) {
    const Refusal bound = only_a_bound(v.peak.lower_bound ? v.name : i.name);
    out.active_w = out.ripple_w = out.apparent_va = out.power_factor = bound;
    out.displacement_power_factor = out.nonactive_var = bound;
    return out;
  }
  const double frequency_hz = result.fundamental ? result.fundamental->frequency_hz : 0.0;
  const double per_delay = power_per_delay(power, frequency_hz);
  const auto with_gains = [&](double value, double by_v_offset, double by_i_offset) {
    return estimate::combine(value, {{v_errors.gain, value},
                                     {i_errors.gain, value},
                                     {v_errors.offset, by_v_offset},
                                     {i_errors.offset, by_i_offset},
                                     {v_errors.delay, per_delay},
                                     {i_errors.delay, -per_delay}});
  };
  const Estimate active = with_gains(power.active_w, i.mean, v.mean);
  const double s = power.apparent_va;
  const Estimate apparent = estimate::combine(s, {{v_errors.gain, s},
                                                  {i_errors.gain, s},
                                                  {v_errors.offset, v.mean / v.rms.value * i.rms.value},
                                                  {i_errors.offset, i.mean / i.rms.value * v.rms.value}});
  out.active_w = active;
  out.ripple_w = with_gains(power.ripple_w, 0.0, 0.0);
  out.apparent_va = apparent;
  out.power_factor = estimate::ratio(active, apparent, "power factor");
  constexpr double kVanishing = 1e-6;
  if (power.nonactive_var > kVanishing * s) {
    const double n = power.nonactive_var;
    out.nonactive_var = estimate::combine(n, {{apparent, s / n}, {active, -power.active_w / n}});
  } else {
    out.nonactive_var =
        Refusal{"power", "nonactive power vanishes; its interval is not linear in its sources"};
  }
  if (!power.fundamental) {
    out.displacement_power_factor = power.fundamental.refusal();
    return out;
  }
  const auto& set = *power.fundamental;
  const double slope = -kTwoPi * frequency_hz * set.reactive_var / set.apparent_va;
  out.displacement_power_factor =
      estimate::combine(set.displacement_power_factor, {{v_errors.delay, slope}, {i_errors.delay, -slope}});
  return out;
}

}  // namespace

WaveformQuote quote(const WaveformResult& result, const CaptureAccuracy& accuracy) {
  WaveformQuote out;
  out.channels.resize(result.channels.size());
  std::vector<std::optional<ChannelErrors>> errors(result.channels.size());
  for (std::size_t c = 0; c < result.channels.size(); ++c) {
    if (c >= accuracy.channels.size() || !accuracy.channels[c]) continue;
    errors[c] = errors_of(*accuracy.channels[c], accuracy.occasion);
    out.channels[c] = quote_channel(result.channels[c], *errors[c], accuracy.occasion);
  }
  if (!result.fundamental) {
    out.frequency_hz = result.fundamental.refusal();
  } else if (accuracy.timebase) {
    const double f = result.fundamental->frequency_hz;
    const Estimate timebase{
        0.0,
        estimate::make_type_b(estimate::key::meter(accuracy.timebase_owner, "timebase"),
                              called(accuracy.timebase_owner, "timebase"),
                              estimate::Distribution::rectangular, accuracy.timebase_owner),
        *accuracy.timebase / std::numbers::sqrt3};
    const double freedom = std::max(1.0, static_cast<double>(result.window.cycles) - 2.0);
    const Estimate scatter{
        0.0,
        estimate::make_type_a(
            estimate::key::window(accuracy.occasion.run, accuracy.occasion.level, "phase of the fundamental"),
            "scatter of the phase", freedom),
        result.fundamental->standard_uncertainty_hz};
    out.frequency_hz = estimate::combine(f, {{timebase, f}, {scatter, 1.0}});
  }
  if (!result.power) {
    const Refusal reason = result.power.refusal();
    out.power = {reason, reason, reason, reason, reason, reason};
  } else if (result.voltage && result.current && errors[*result.voltage] && errors[*result.current]) {
    out.power = quote_power(result, result.channels[*result.voltage], result.channels[*result.current],
                            *errors[*result.voltage], *errors[*result.current]);
  }
  return out;
}

}  // namespace loadstair::waveform
