// A step's temperature as it is judged: above ambient, from the last change point on; private to this room.
#pragma once

#include <span>
#include <vector>

#include "analysis/settling/settling.h"

namespace loadstair::settling {

/// The rise above ambient, moved to the last ambient: the object's own approach, whatever the room does.
[[nodiscard]] std::vector<double> moved_to_last_ambient(const Trace& trace, std::span<const double> ambient);

/// When the stretch that is judged begins: the last change point, else the first reading.
[[nodiscard]] double stretch_begins(const Trace& trace);

/// Value at t: a line through the readings of `stretch_s` before it, read off at t; with fewer than three
/// there, between the neighbours.
[[nodiscard]] double value_at(const Trace& trace, double t_s, double stretch_s);

/// Where a trace stands at its end, and what a fit says may still come.
[[nodiscard]] Interval present_and_rest(const Trace& trace, const base::Outcome<ExponentialFit>& fit,
                                        double window_s);

}  // namespace loadstair::settling
