#include <algorithm>
#include <cmath>
#include <complex>
#include <numbers>
#include <vector>

#include "analysis/base/number.h"
#include "analysis/waveform/quote_sources.h"

namespace loadstair::waveform {
namespace {

using base::Refusal;
using estimate::Estimate;

constexpr double kTwoPi = 2.0 * std::numbers::pi;

/// What the powers become when both channels' low-passes are undone with bandwidths moved by these factors.
struct Moved {
  double voltage = 1.0, current = 1.0;
};

struct Pair {
  const WaveformResult& result;
  const ChannelResult& v;
  const ChannelResult& i;
  const ChannelErrors& v_errors;
  const ChannelErrors& i_errors;
  bool deskewed = false;

  [[nodiscard]] std::complex<double> factor(std::size_t h, const Moved& moved) const {
    const Harmonic& a = v.harmonics[h];
    const Harmonic& b = i.harmonics[h];
    if (a.below_floor || b.below_floor) return 1.0;
    return undone_low_pass(v_errors.accuracy, a.frequency_hz, deskewed, moved.voltage) *
           std::conj(undone_low_pass(i_errors.accuracy, b.frequency_hz, deskewed, moved.current));
  }
};

/// What is to be added to the active power.
double active_correction(const Pair& pair, const Moved& moved) {
  const auto& fundamental = pair.result.power->fundamental;
  if (!fundamental) return 0.0;
  double sum = 0.0;
  for (std::size_t h = 0; h < fundamental->active_by_order_w.size(); ++h) {
    const std::complex<double> s{fundamental->active_by_order_w[h], fundamental->reactive_by_order_var[h]};
    sum += (s * (pair.factor(h, moved) - 1.0)).real();
  }
  return sum;
}

double corrected_rms(const ChannelResult& channel, const ChannelErrors& errors, double moved) {
  return errors.accuracy.bandwidth_hz ? std::sqrt(corrected_square(channel, errors.accuracy, moved))
                                      : channel.rms.value;
}

double displacement(const Pair& pair, const Moved& moved) {
  const auto& set = *pair.result.power->fundamental;
  const std::complex<double> s = std::complex<double>{set.active_w, set.reactive_var} * pair.factor(0, moved);
  return s.real() / std::abs(s);
}

/// A value of both bandwidths: corrected, with both tolerances' parts.
template <class ValueAt>
Estimate with_bandwidths(const Pair& pair, ValueAt value_at) {
  const Estimate by_voltage = with_bandwidth(pair.v_errors, [&](double m) {
    return value_at(Moved{m, 1.0});
  });
  const Estimate by_current = with_bandwidth(pair.i_errors, [&](double m) {
    return value_at(Moved{1.0, m});
  });
  return estimate::combine(by_voltage.value(), {{by_voltage, 1.0}, {by_current, 1.0}});
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

/// Phase error of one order between the channels, rad about zero.
Estimate phase_error(const Pair& pair, std::size_t order) {
  const std::string part = "phase at order " + base::print_integer(static_cast<std::int64_t>(order));
  return lasting_error(pair.v_errors.accuracy.owner, part, pair.v_errors.accuracy.phase_rad) +
         lasting_error(pair.i_errors.accuracy.owner, part, pair.i_errors.accuracy.phase_rad);
}

/// Phase errors in the active power: tan(phi) u(phi) of each order's share, that is Q_h u(phi).
Estimate phase_part(const Pair& pair) {
  Estimate sum{0.0};
  const auto& fundamental = pair.result.power->fundamental;
  const double phase = pair.v_errors.accuracy.phase_rad + pair.i_errors.accuracy.phase_rad;
  if (!fundamental || !(phase > 0.0)) return sum;
  constexpr double kVanishing = 1e-6;
  for (std::size_t h = 0; h < fundamental->reactive_by_order_var.size(); ++h) {
    const double reactive = fundamental->reactive_by_order_var[h];
    if (std::abs(reactive) < kVanishing * pair.result.power->apparent_va) continue;
    sum = sum + phase_error(pair, h + 1) * reactive;
  }
  return sum;
}

struct Levels {
  Estimate active{0.0}, apparent{0.0};
};

Levels levels_of(PowerQuote& out, const Pair& pair, const estimate::Occasion& occasion) {
  const Power& power = *pair.result.power;
  const auto& [result, v, i, v_errors, i_errors, deskewed] = pair;
  const double frequency_hz = result.fundamental ? result.fundamental->frequency_hz : 0.0;
  const double per_delay = power_per_delay(power, frequency_hz);
  const Estimate phase = phase_part(pair);
  const Estimate scatter = own_scatter(occasion, "scatter of the power", power.active_standard_uncertainty_w,
                                       power.degrees_of_freedom);
  const Estimate correction =
      with_bandwidths(pair, [&](const Moved& moved) { return active_correction(pair, moved); });
  const auto with_errors = [&](double value, double by_v_offset, double by_i_offset, const Estimate& bent_v,
                               const Estimate& bent_i) {
    const double corrected = value + correction.value();
    return estimate::combine(corrected, {{correction, 1.0},
                                         {v_errors.gain, corrected},
                                         {i_errors.gain, corrected},
                                         {v_errors.offset, by_v_offset},
                                         {i_errors.offset, by_i_offset},
                                         {v_errors.delay, per_delay},
                                         {i_errors.delay, -per_delay},
                                         {phase, 1.0},
                                         {bent_v, 1.0},
                                         {bent_i, 1.0},
                                         {scatter, 1.0}});
  };
  const auto bent = [&](const ChannelErrors& errors, const char* part, double other) {
    return shared_error(errors.accuracy, part, errors.linearity * other, occasion);
  };
  Levels levels;
  levels.active =
      with_errors(power.active_w, i.mean, v.mean, bent(v_errors, "linearity, power", i.mean_rectified),
                  bent(i_errors, "linearity, power", v.mean_rectified));
  out.ripple_w =
      with_errors(power.ripple_w, 0.0, 0.0, bent(v_errors, "linearity, ripple power", i.ripple_rms.value),
                  bent(i_errors, "linearity, ripple power", v.ripple_rms.value));
  const Estimate rms = with_bandwidths(pair, [&](const Moved& moved) {
    return corrected_rms(v, v_errors, moved.voltage) * corrected_rms(i, i_errors, moved.current);
  });
  const double s = rms.value();
  const auto rms_scatter = [&](const ChannelResult& channel) {
    return own_scatter(occasion, "scatter of the RMS of " + channel.name, channel.rms_standard_uncertainty,
                       channel.degrees_of_freedom);
  };
  levels.apparent = estimate::combine(s, {{rms, 1.0},
                                          {v_errors.gain, s},
                                          {i_errors.gain, s},
                                          {v_errors.offset, v.mean / v.rms.value * i.rms.value},
                                          {i_errors.offset, i.mean / i.rms.value * v.rms.value},
                                          {v_errors.bent_rms, i.rms.value},
                                          {i_errors.bent_rms, v.rms.value},
                                          {rms_scatter(v), i.rms.value},
                                          {rms_scatter(i), v.rms.value}});
  return levels;
}

}  // namespace

PowerQuote quote_power(const WaveformResult& result, const ChannelErrors& voltage,
                       const ChannelErrors& current, const CaptureAccuracy& accuracy) {
  PowerQuote out;
  const Power& power = *result.power;
  const Pair pair{
      result,           result.channels[*result.voltage], result.channels[*result.current], voltage, current,
      accuracy.deskewed};
  if (pair.v.peak.lower_bound || pair.i.peak.lower_bound) {
    const Refusal bound = only_a_bound(pair.v.peak.lower_bound ? pair.v.name : pair.i.name);
    out.active_w = out.ripple_w = out.apparent_va = out.power_factor = bound;
    out.displacement_power_factor = out.nonactive_var = bound;
    return out;
  }
  const Levels levels = levels_of(out, pair, accuracy.occasion);
  out.active_w = levels.active;
  out.apparent_va = levels.apparent;
  out.power_factor = estimate::ratio(levels.active, levels.apparent, "power factor");
  const double s = levels.apparent.value();
  const double p = levels.active.value();
  const double n = std::sqrt(std::max(0.0, s * s - p * p));
  constexpr double kVanishing = 1e-6;
  if (n > kVanishing * s) {
    const double value = s == power.apparent_va && p == power.active_w ? power.nonactive_var : n;
    out.nonactive_var = estimate::combine(value, {{levels.apparent, s / n}, {levels.active, -p / n}});
  } else {
    out.nonactive_var =
        Refusal{"power", "nonactive power vanishes; its interval is not linear in its sources"};
  }
  if (!power.fundamental) {
    out.displacement_power_factor = power.fundamental.refusal();
    return out;
  }
  const auto& set = *power.fundamental;
  const double by_phase = set.reactive_var / set.apparent_va;
  const double slope = -kTwoPi * result.fundamental->frequency_hz * by_phase;
  const bool narrow = voltage.accuracy.bandwidth_hz || current.accuracy.bandwidth_hz;
  const Estimate value =
      narrow ? with_bandwidths(pair, [&](const Moved& moved) { return displacement(pair, moved); })
             : Estimate{set.displacement_power_factor};
  out.displacement_power_factor = estimate::combine(
      value.value(),
      {{value, 1.0}, {voltage.delay, slope}, {current.delay, -slope}, {phase_error(pair, 1), by_phase}});
  return out;
}

}  // namespace loadstair::waveform
