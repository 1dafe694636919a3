// Under what conditions a channel was read, and whether its meter's specification holds there. Of this room
// only.
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "analysis/estimate/conditions.h"
#include "daemon/evaluation/channel_value.h"
#include "daemon/evaluation/port_step.h"
#include "daemon/evaluation/result.h"
#include "daemon/setup/stair.h"

namespace loadstair::evaluation {

/// Around the bench during a window: the mean of the first ambient channel that was read, else what the stair
/// file says.
[[nodiscard]] double ambient_of(const setup::Hookup& hookup, const setup::Stair& stair,
                                const std::vector<Track>& tracks, double from_s, double to_s);

/// Days from an ISO 8601 date to a UTC instant; nullopt: no date, or it lies later.
[[nodiscard]] std::optional<double> days_since(const std::string& date, std::int64_t t_ns);

/// The declared conditions as analysis takes them, the growth in % of reading and of range.
[[nodiscard]] estimate::SpecificationConditions conditions_of(const setup::Channel& channel, int range);

/// What of the conditions of the channels did not hold, or is not known: one sentence each, naming the
/// channel. Frequency and power factor are looked up in the step's result.
[[nodiscard]] std::vector<std::string> condition_remarks(const StepValues& values, const setup::Stair& stair,
                                                         const StepResult& result);

}  // namespace loadstair::evaluation
