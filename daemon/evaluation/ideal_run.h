// A run as it would be recorded if everything were as the two files say: for forecasts. Of this room only.
#pragma once

#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "daemon/setup/hookup.h"
#include "daemon/setup/stair.h"
#include "daemon/store/reader.h"

namespace loadstair::evaluation {

/// What a port is at in a step.
struct PortTruth {
  double voltage_v = 0.0, current_a = 0.0, power_w = 0.0, power_factor = 1.0;
  double current_factor = 1.0;  ///< what current and power are read with, so that corrections end at power_w
};
struct StepTruth {
  std::vector<PortTruth> ports;  ///< in the hook-up file's order
};

/// From the plan: output power, rated or set voltages, the expected efficiency; power is shared alike among
/// the counted ports of a direction, and nothing is expected of the others. Without a load half of the rated
/// loss goes in, at standby a twentieth of that (common practice, no source).
[[nodiscard]] std::vector<StepTruth> truths_of(const setup::Hookup& hookup, const setup::Stair& stair);

/// What the channel's meter shows where its quantity is `value`: the conversion backwards. nullopt: the
/// sensor has no such value.
[[nodiscard]] std::optional<double> raw_of(const setup::Channel& channel, double value,
                                           double cold_junction_degc);

/// Readings at the declared polling and update periods, rounded to the last digit, with no noise but what
/// makes that digit change; two typed rounds; sine captures where the step takes one; temperatures at
/// ambient. started_ns   the run's start, UTC: how old calibrations are then
[[nodiscard]] store::StoredRun ideal_run(const setup::Hookup& hookup, const setup::Stair& stair,
                                         const std::vector<StepTruth>& truths, std::int64_t started_ns);

}  // namespace loadstair::evaluation
