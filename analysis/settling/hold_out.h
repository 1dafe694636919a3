// A prediction put to the test: what it would have said early in a step against where the step really ended.
#pragma once

#include <optional>
#include <span>
#include <string>

#include "analysis/base/outcome.h"
#include "analysis/settling/settling.h"

namespace loadstair::settling {

/// The earliest acceptable prediction of a step that went on to its end.
struct HoldOut {
  double after_s = 0.0;    ///< from the trace's first reading to the last one that the prediction saw
  double earlier_s = 0.0;  ///< so much before the trace's last reading
  Interval predicted;      ///< what would have been accepted, 95 %
  Interval measured;       ///< the end as the whole trace shows it, with what may still come
  double error = 0.0;      ///< predicted less measured value
  bool held = false;       ///< the two intervals meet
  std::string text;        ///< for a person
};

struct HoldOutSettings {
  int instants = 40;  ///< cut-offs that are tried, evenly spaced over the trace; 2 to 1000
};

/// Cuts the trace short at evenly spaced instants, earliest first, and asks at each whether a prediction
/// would have been accepted, change points included, exactly as settled_thermally() does; the first one that
/// is counts. may_end_step of the criterion is not looked at: the question is what it would have said.
/// ambient    same instants, or empty. Both ends are moved to the ambient at the end of the trace.
/// Returns: nullopt where no prediction would have been accepted before the last reading, or the criterion
/// has none. Refused: what settled_thermally() refuses; fewer than 20 readings. Cost: `instants` times a
/// prediction with its change points, about 10 ms each.
[[nodiscard]] base::Outcome<std::optional<HoldOut>> hold_out(const Trace& trace,
                                                             std::span<const double> ambient,
                                                             const ThermalCriterion& criterion,
                                                             const HoldOutSettings& settings = {});

}  // namespace loadstair::settling
