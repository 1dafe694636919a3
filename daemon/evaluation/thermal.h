// The thermal criterion of a step, for the live side and for results. Of this room only.
#pragma once

#include <optional>
#include <span>
#include <vector>

#include "analysis/series/time_series.h"
#include "analysis/settling/settling.h"
#include "daemon/setup/stair.h"

namespace loadstair::evaluation {

/// may_end   a prediction may end the step
[[nodiscard]] settling::ThermalCriterion criterion_of(const setup::ThermalSettle& thermal, bool may_end);

/// A slow series read off at other instants, its ends held: one value per instant, or none for an empty
/// series.
[[nodiscard]] std::vector<double> read_off(const series::TimeSeries& from, std::span<const double> at_s);

/// Change over the last `window_s`, mean over a twentieth of the window at both ends; nullopt when the trace
/// is shorter.
[[nodiscard]] std::optional<double> change_over(const series::TimeSeries& trace, double window_s);

}  // namespace loadstair::evaluation
