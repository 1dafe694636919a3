// A run's channels as converted series over the run's time. Of this room only.
#pragma once

#include <cstdint>
#include <string>
#include <vector>

#include "analysis/series/time_series.h"
#include "daemon/setup/hookup.h"
#include "daemon/store/reader.h"

namespace loadstair::evaluation {

inline constexpr int kNoRange = -1;

/// The good readings of one channel, instants strictly rising, s since the run's start; and those that were
/// not good.
struct Track {
  const setup::Channel* channel = nullptr;
  std::int32_t index = -1;  ///< among the run's channels; -1: the run has no such channel
  std::vector<double> time_s, raw, value, half_width_s;
  std::vector<int> range;  ///< index into channel->ranges, kNoRange where none fits
  struct Unusable {
    double time_s = 0.0;
    std::string reason;
  };
  std::vector<Unusable> unusable;

  [[nodiscard]] series::TimeSeries all() const { return {time_s, value}; }
};

/// A part of a track: [first, last) of its readings.
struct Stretch {
  const Track* track = nullptr;
  std::size_t first = 0, last = 0;

  [[nodiscard]] std::size_t size() const { return last - first; }
  [[nodiscard]] series::TimeSeries values() const;
  [[nodiscard]] series::TimeSeries raws() const;
};
/// Readings with instants in [from_s, to_s].
[[nodiscard]] Stretch stretch(const Track& track, double from_s, double to_s);
/// Readings that stand for nothing outside [from_s, to_s]: their half-width and half the integration time lie
/// inside too. A reading at the edge may already be of the next set point.
[[nodiscard]] Stretch whole_within(const Track& track, double from_s, double to_s, double integration_s);

/// One track per channel of the hook-up file, in its order.
[[nodiscard]] std::vector<Track> tracks_of(const store::StoredRun& run, const setup::Hookup& hookup);

/// Seconds since the run's start.
[[nodiscard]] double since_start(const store::StoredRun& run, std::int64_t t_ns);

/// The declared range a reading was taken on: the one that the instrument named, else the least that holds
/// the reading (the meter chooses by itself). kNoRange when none fits.
[[nodiscard]] int range_of(const setup::Channel& channel, double raw, double named_range);

}  // namespace loadstair::evaluation
