// Voltage, current and power of one port from one wattmeter: their gains are partly the same. Of this room
// only.
#pragma once

#include "daemon/evaluation/port_step.h"

namespace loadstair::evaluation {

/// Makes the values of ports whose three functions come from one wattmeter anew with the sources that they
/// share, and adds what the phase error does to a power. Keeps beside them what V I PF - P is when nothing is
/// shared: a specification does not promise the sharing, so the cross-check must not rely on it.
/// Left as they are: functions of several meters, channels with a zero, a tie or several ranges in the
/// window.
void share_wattmeters(StepValues& values);

}  // namespace loadstair::evaluation
