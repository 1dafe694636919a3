// Seconds of files and people, nanoseconds of the clock.
#pragma once

#include <algorithm>
#include <cmath>
#include <cstdint>

namespace loadstair::sequencer {

/// Nearest nanosecond; bounded to +-100 years, so that sums of instants stay within 64 bits.
[[nodiscard]] inline std::int64_t ticks_of(double seconds) {
  constexpr double kMost = 3.15e9;
  return std::llround(std::clamp(seconds, -kMost, kMost) * 1e9);
}

[[nodiscard]] inline double seconds_of(std::int64_t ticks) {
  return static_cast<double>(ticks) * 1e-9;
}

}  // namespace loadstair::sequencer
