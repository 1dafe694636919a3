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
};

/// What is declared of the whole record.
struct CaptureAccuracy {
  std::vector<std::optional<ChannelAccuracy>> channels;  ///< as in the result; nullopt: nothing is declared
  std::optional<double> timebase;                        ///< relative half-width of the sampling rate
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

/// Attaches gain, offset and delay by the chain rule (JCGM 100:2008 5.1), quantisation to the peak, the
/// record's noise to THD. Gain, offset and delay of one channel are the same sources in all its results, so
/// that power factor and crest factor lose the gains. The delay enters the active power as the sum over
/// orders of 2 pi f_h Q_h u(delay). A clipped channel is refused: its results are bounds. Not contained:
/// bandwidth, and what the caller did not declare.
WaveformQuote quote(const WaveformResult& result, const CaptureAccuracy& accuracy);

}  // namespace loadstair::waveform
