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

/// Input less output power of the counted ports over a longer stretch than the window, at common instants. As
/// the meters read: no burden, no leads; for how the loss moves, not for what it is.
struct LossSeries {
  std::vector<double> time_s, loss_w;
};
/// Returns: nullopt where a counted port's power is not read all the time, or no instants are common.
[[nodiscard]] std::optional<LossSeries> loss_between(const StepValues& values,
                                                     const efficiency::StepResult& ports, double from_s,
                                                     double to_s);

}  // namespace loadstair::evaluation
