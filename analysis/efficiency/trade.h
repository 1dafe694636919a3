// Small arithmetic of the trade: trip point of a sense resistor, least DC bus of a bridge without boost.
#pragma once

#include "analysis/estimate/estimate.h"

namespace loadstair::efficiency {

/// What a current-sense threshold acts on.
enum class Sense { peak, rms, average };

/// Ratios of the current's waveform, as a capture gives them; a sine's by default.
struct WaveShape {
  estimate::Estimate crest_factor{1.4142135623730951};  ///< peak / RMS
  estimate::Estimate form_factor{1.1107207345395915};   ///< RMS / mean-rectified
};

/// RMS current at which the threshold over the sense resistor is reached, A.
/// threshold_v, resistor_ohm  the resistor must be above zero: refused otherwise, as numbers that are not
/// finite
[[nodiscard]] estimate::Quoted trip_current(const estimate::Estimate& threshold_v,
                                            const estimate::Estimate& resistor_ohm, Sense sense,
                                            const WaveShape& shape = {});

/// Least DC bus of a bridge without boost: the peak of its sinusoidal output, V.
/// voltage_rms_v  zero or more, finite: refused otherwise
[[nodiscard]] base::Outcome<double> least_dc_bus_v(double voltage_rms_v);

}  // namespace loadstair::efficiency
