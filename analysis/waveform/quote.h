// Results of a record as estimates, from what is declared of its channels' accuracy.
#pragma once

#include <optional>
#include <vector>

#include "analysis/estimate/estimate.h"
#include "analysis/estimate/meter.h"
#include "analysis/waveform/waveform.h"

namespace loadstair::waveform {

/// What is declared of one channel (scope input and probe together): half-widths, rectangular.
struct ChannelAccuracy {
  estimate::Owner owner;    ///< whose errors they are; the same owner on the same range is the same error
  double gain = 0.0;        ///< relative, 0.02 for 2 %
  double offset = 0.0;      ///< in the channel's unit
  double delay_s = 0.0;     ///< of the known delay (deskew), s
  estimate::Shares shares;  ///< how gain and offset split over runs and levels
  /// -3 dB frequency of a first-order low-pass (scope input and probe), Hz; nullopt: not declared. Results
  /// are corrected order by order; the tolerance is what is left.
  std::optional<double> bandwidth_hz;
  double bandwidth_tolerance = 0.3;  ///< relative half-width of it (common practice, no source)
  double linearity = 0.0;  ///< deviation from the straight line, relative to the record's peak to peak
  double phase_rad = 0.0;  ///< phase error against the other channel that is no delay, at any order
};

/// What is declared of the whole record.
struct CaptureAccuracy {
  std::vector<std::optional<ChannelAccuracy>> channels;  ///< as in the result; nullopt: nothing is declared
  /// The channels' delay was measured on one resistive signal, so that the lag of their bandwidths is in it.
  bool deskewed = false;
  std::optional<double> timebase;  ///< relative half-width of the sampling rate
  estimate::Owner timebase_owner;
  estimate::Occasion occasion;  ///< run and level; the level names the step
};

inline const base::Refusal kUncertaintyNotKnown{"", "uncertainty not known: no accuracy is declared"};

/// The quoted results of one channel; each is refused with the result's own reason, or as "uncertainty not
/// known".
struct ChannelQuote {
  estimate::Quoted mean = kUncertaintyNotKnown;
  estimate::Quoted rms = kUncertaintyNotKnown;
  estimate::Quoted ripple_rms = kUncertaintyNotKnown;
  estimate::Quoted peak = kUncertaintyNotKnown;
  estimate::Quoted crest_factor = kUncertaintyNotKnown;
  estimate::Quoted crest_factor_in_band = kUncertaintyNotKnown;
  estimate::Quoted form_factor = kUncertaintyNotKnown;
  estimate::Quoted thd_f = kUncertaintyNotKnown;
};

struct PowerQuote {
  estimate::Quoted active_w = kUncertaintyNotKnown;
  estimate::Quoted ripple_w = kUncertaintyNotKnown;
  estimate::Quoted apparent_va = kUncertaintyNotKnown;
  estimate::Quoted power_factor = kUncertaintyNotKnown;
  estimate::Quoted displacement_power_factor = kUncertaintyNotKnown;
  estimate::Quoted nonactive_var = kUncertaintyNotKnown;
};

struct WaveformQuote {
  estimate::Quoted frequency_hz = kUncertaintyNotKnown;
  std::vector<ChannelQuote> channels;  ///< in the order of the result
  PowerQuote power;
};

/// Attaches what is declared by the chain rule (JCGM 100:2008 5.1), and what the record itself shows.
///   gain, offset  of one channel are the same sources in all its results: power factor, crest factor lose
///   gains delay         enters the active power as the sum over orders of 2 pi f_h Q_h u(delay) phase one
///   source per order: Q_h u(phase) each bandwidth     RMS, THD and powers are corrected order by order for
///   the low-pass (|H| = 1/sqrt(1 + (f/f_b)^2),
///                 phase -atan(f/f_b), of which -f/f_b counts as delay when deskewed); the tolerance of f_b
///                 is the source. Orders below the floor and what lies above the highest order are not
///                 corrected. A peak is not corrected: what the low-pass takes off is its uncertainty
///   linearity     at most its half-width in mean, RMS, peak; voltage's half-width times the rectified mean
///   of the
///                 current in P; a THD may be wrong by its share of the fundamental
///   quantisation  whole in a peak; in a mean q/sqrt 12 as far as noise and ripple do not sweep the steps
///                 (quantisation_of_mean())
///   scatter       Type A over cycles in mean, RMS, P and frequency
/// A clipped channel is refused: its results are bounds. The frequency needs the time base and three cycles.
/// Not contained: what the caller did not declare.
WaveformQuote quote(const WaveformResult& result, const CaptureAccuracy& accuracy);

/// Standard uncertainty that steps of size q leave in a mean over many samples: q/sqrt 12 for a signal at
/// rest, less by the signal's characteristic function at 2 pi/q where it moves over the steps: exp(-2 pi^2
/// s^2/q^2) for noise of RMS s, the envelope of J0(2 pi A/q) for a sine of amplitude A. Of both the smaller.
/// Source: Widrow and Kollar, Quantization Noise (2008), the quantisation theorems (from memory).
double quantisation_of_mean(double step, double noise_rms, double alternating_rms);

}  // namespace loadstair::waveform
