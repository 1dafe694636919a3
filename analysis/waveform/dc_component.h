// Direct component of an alternating voltage or current, judged against the channel's zero before and after.
#pragma once

#include <optional>

#include "analysis/base/outcome.h"
#include "analysis/waveform/quote.h"
#include "analysis/waveform/waveform.h"

namespace loadstair::waveform {

/// A channel's reading with nothing on it: input shorted, current probe zeroed and empty.
struct ZeroReading {
  double value = 0.0;                 ///< in the channel's unit, with its scale and offset
  double standard_uncertainty = 0.0;  ///< Type A, autocorrelation counted
  double degrees_of_freedom = 0.0;    ///< of it
  double noise_rms = 0.0;
  double quantisation_step = 0.0;  ///< 0: all samples equal, the step is not seen
};

/// Mean of a record with nothing on the channel. Refuses what prepare() refuses, fewer than 16 samples, and a
/// clipped record. Type A by batch means of 20 equal parts (correlation shorter than a part does not harm).
base::Outcome<ZeroReading> zero_of(const Channel& channel);

/// A zero that was read by hand or by a meter: its value and what is known of it.
struct Zeros {
  std::optional<ZeroReading> before, after;
};

struct DcComponent {
  double mean = 0.0;              ///< of the capture, as it stands
  double zero = 0.0;              ///< halfway between both zeros, taken off
  double drift = 0.0;             ///< after less before
  estimate::Estimate value{0.0};  ///< mean - zero, in the channel's unit
  /// value over the rated current, ratio; refused without a rated current.
  estimate::Quoted share_of_rated = base::Refusal{};
};

/// The direct component of one channel of an analysed record.
/// channel   its result, over whole cycles
/// zeros     both are needed
/// accuracy  gain counts; the declared offset is replaced by the zeros
/// rated     rated current (RMS, above zero) in the channel's unit; nullopt: none declared, or a voltage
/// u: half the drift between the zeros as a rectangular half-width; Type A of the capture's mean and of the
/// mean of both zeros; quantisation of all three (quantisation_of_mean(); the steps seen in the capture serve
/// zeros that show none); gain times value. Refuses as "undecided: ..." without both zeros and for fewer than
/// three cycles (no Type A); a clipped channel; undeclared accuracy ("uncertainty not known").
base::Outcome<DcComponent> dc_component(const ChannelResult& channel, const Zeros& zeros,
                                        const std::optional<ChannelAccuracy>& accuracy,
                                        const estimate::Occasion& occasion,
                                        std::optional<double> rated = std::nullopt);

}  // namespace loadstair::waveform
