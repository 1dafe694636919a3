// A time series as the rooms of analysis pass it: two spans of equal length that somebody else owns.
#pragma once

#include <cstddef>
#include <span>

namespace loadstair::series {

/// Readings of one channel, or of anything computed from channels.
/// time_s  instants, s, finite, not decreasing; any origin (one run's start is usual)
/// value   values in one unit, finite, as many as instants
/// Valid for the length of a call; nothing here keeps it.
struct TimeSeries {
  std::span<const double> time_s;
  std::span<const double> value;

  [[nodiscard]] std::size_t size() const { return value.size(); }
};

}  // namespace loadstair::series
