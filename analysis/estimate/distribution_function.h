// Distribution functions that other rooms need: the library behind them stays in this room.
#pragma once

namespace loadstair::estimate {

/// Probability that a standard Student's t is at most x; degrees_of_freedom above zero, fractional or
/// infinite (normal).
[[nodiscard]] double student_below(double x, double degrees_of_freedom);

}  // namespace loadstair::estimate
