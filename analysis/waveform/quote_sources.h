// Sources of error of a capture as estimates about zero; private to this room.
#pragma once

#include <complex>
#include <string>

#include "analysis/waveform/quote.h"

namespace loadstair::waveform {

/// An error that the channel brings along, in shares over runs and levels; rectangular of the half-width,
/// exactly zero where that is zero. part: "gain", "offset", ...
estimate::Estimate shared_error(const ChannelAccuracy& accuracy, const std::string& part, double half_width,
                                const estimate::Occasion& occasion);

/// The same without shares: the same in every run.
estimate::Estimate lasting_error(const estimate::Owner& owner, const std::string& part, double half_width);

inline estimate::Estimate gain_error(const ChannelAccuracy& accuracy, const estimate::Occasion& occasion) {
  return shared_error(accuracy, "gain", accuracy.gain, occasion);
}

/// An error of this record alone.
estimate::Estimate own_error(const estimate::Occasion& occasion, const std::string& part,
                             double standard_uncertainty, estimate::Distribution distribution);

/// Type A of this record; zero where its degrees of freedom are.
estimate::Estimate own_scatter(const estimate::Occasion& occasion, const std::string& part,
                               double standard_uncertainty, double degrees_of_freedom);

/// Errors of one channel: relative gain, offset in the channel's unit, delay in s, linearity in the channel's
/// unit.
struct ChannelErrors {
  const ChannelAccuracy& accuracy;
  estimate::Estimate gain{0.0}, offset{0.0}, delay{0.0};
  /// Of the mean, the RMS, the rectified mean and the peak: one curve, but what it does to each is unlike.
  estimate::Estimate bent_mean{0.0}, bent_rms{0.0}, bent_rectified{0.0}, bent_peak{0.0};
  /// Relative error of the declared bandwidth, standard uncertainty; zero where none is declared.
  estimate::Estimate bandwidth{0.0};
  double linearity = 0.0;  ///< half-width in the channel's unit
};
ChannelErrors errors_of(const ChannelAccuracy& accuracy, const ChannelResult& channel,
                        const estimate::Occasion& occasion);

/// What a line must be multiplied by to undo the channel's low-pass: 1 + j f/f_b, the delay left in it or
/// not. moved: f_b times this
std::complex<double> undone_low_pass(const ChannelAccuracy& accuracy, double frequency_hz, bool deskewed,
                                     double moved);

/// Mean square of a channel with the low-pass undone order by order, those below the
/// floor as they are.
double corrected_square(const ChannelResult& channel, const ChannelAccuracy& accuracy, double moved);

/// A value that depends on the declared bandwidth by value_at(factor of f_b): corrected, with the tolerance's
/// part.
template <class ValueAt>
estimate::Estimate with_bandwidth(const ChannelErrors& errors, ValueAt value_at) {
  const double value = value_at(1.0);
  const double u = errors.bandwidth.standard_uncertainty();
  if (!(u > 0.0)) return estimate::Estimate{value};
  const double moved = 0.5 * (value_at(1.0 + u) - value_at(1.0 - u));
  return estimate::combine(value, {{errors.bandwidth, moved / u}});
}

/// The powers of a quoted pair. Precondition: result.power is there.
PowerQuote quote_power(const WaveformResult& result, const ChannelErrors& voltage,
                       const ChannelErrors& current, const CaptureAccuracy& accuracy);

base::Refusal only_a_bound(const std::string& channel);

}  // namespace loadstair::waveform
