// Powers of a voltage and a current; private to this room.
#pragma once

#include "analysis/base/outcome.h"
#include "analysis/waveform/channel.h"

namespace loadstair::waveform {

/// voltage_delay_s and current_delay_s: known lateness, already taken out of the lines; the active power is
/// corrected by the difference per order.
base::Outcome<Power> powers(const Prepared& v, const Prepared& i, const ChannelAnalysis& voltage,
                            const ChannelAnalysis& current, const CycleWindow& window,
                            double delay_difference_s, double frequency_hz);

}  // namespace loadstair::waveform
