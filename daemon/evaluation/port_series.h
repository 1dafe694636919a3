// Type A of a step on its aligned series of powers. Of this room only.
#pragma once

#include <optional>

#include "daemon/evaluation/port_step.h"

namespace loadstair::evaluation {

/// The statistical parts of P_in, P_out, loss and efficiency from the ports' power series at common instants.
/// What does not vary within the window as far as is known (typed values, captures) enters as a constant.
/// ports   as found without series: tells by which way each port's power is had
/// Returns: nullopt where nothing linked enters, or no instants are common.
[[nodiscard]] std::optional<efficiency::StepNoise> noise_of(const StepValues& values,
                                                            const efficiency::StepResult& ports);

}  // namespace loadstair::evaluation
