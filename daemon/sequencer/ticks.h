// Seconds of files and people, nanoseconds of the clock; numbers for messages.
#pragma once

#include <algorithm>
#include <cmath>
#include <cstdint>
#include <string>

#include "analysis/base/number.h"

namespace loadstair::sequencer {

/// Nearest nanosecond; bounded to +-100 years, so that sums of instants stay within 64 bits.
[[nodiscard]] inline std::int64_t ticks_of(double seconds) {
  constexpr double kMost = 3.15e9;
  return std::llround(std::clamp(seconds, -kMost, kMost) * 1e9);
}

[[nodiscard]] inline double seconds_of(std::int64_t ticks) {
  return static_cast<double>(ticks) * 1e-9;
}

/// At most six significant digits, without the zeros that nobody wrote: "95", "385.2".
[[nodiscard]] inline std::string brief(double value) {
  return base::print_number(base::parse_number(base::print_significant(value, 6)).value_or(value));
}

}  // namespace loadstair::sequencer
