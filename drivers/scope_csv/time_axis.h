// Inside the room: are printed times those of uniform sampling, and at which interval.
#pragma once

#include <cstddef>
#include <optional>
#include <span>
#include <string>

namespace loadstair::scope_csv {

/// The grid that printed times lie on.
struct TimeGrid {
  double start_s = 0.0;
  double interval_s = 0.0;
  double resolution_s = 0.0;         ///< last printed digit
  double largest_deviation_s = 0.0;  ///< of a printed time from the grid through the first and the last one
};

/// Why times are not uniform: at which row, and what is there.
struct TimeFault {
  std::size_t row = 0;  ///< index
  std::string reason;
};

struct TimeCheck {
  TimeGrid grid;
  std::optional<TimeFault> fault;
};

/// Checks that times are uniform and finds their interval, (last - first) / (rows - 1).
/// times_s       at least two
/// digits        most significant digits that any of them was printed with, from 1; the last printed digit of
/// the
///               largest time is the resolution, since fixed, scientific and shortest notation agree on that
///               one
/// Each time may lie off the grid by one printed digit (half of it for its own rounding, half for that of the
/// ends; a truncated print stays within it too) or by 1 % of the interval, whichever is more (common
/// practice, no source: at 20 samples a cycle 1 % of a step is 0.3 % of the amplitude at the steepest place).
/// Beyond it is a gap, a step back, or jitter. Where the interval is within twice the resolution, one missing
/// row hides in the rounding: there, a single step that is longer by three quarters of an interval than all
/// others is a gap as well.
[[nodiscard]] TimeCheck check_times(std::span<const double> times_s, int digits);

}  // namespace loadstair::scope_csv
