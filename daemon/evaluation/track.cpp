#include "daemon/evaluation/track.h"

#include <algorithm>
#include <cmath>
#include <numeric>

#include "daemon/evaluation/live.h"
#include "daemon/evaluation/sensor_of.h"
#include "daemon/evaluation/thermal.h"

namespace loadstair::evaluation {
namespace {

/// Meters go on a little beyond a range's full scale (common practice, no source).
constexpr double kOverrange = 1.2;
constexpr double kSameRange = 1e-6;

const store::StoredChannel* find(const store::StoredRun& run, const std::string& name, std::int32_t& index) {
  for (std::size_t i = 0; i < run.channels.size(); ++i) {
    if (run.channels[i].entry.name != name) continue;
    index = static_cast<std::int32_t>(i);
    return &run.channels[i];
  }
  return nullptr;
}

/// Places of the readings in the order of their instants; a stable order for equal ones.
std::vector<std::size_t> by_time(const store::StoredChannel& stored) {
  std::vector<std::size_t> order(stored.t_ns.size());
  std::iota(order.begin(), order.end(), std::size_t{0});
  const auto earlier = [&](std::size_t a, std::size_t b) { return stored.t_ns[a] < stored.t_ns[b]; };
  if (!std::is_sorted(order.begin(), order.end(), earlier))
    std::stable_sort(order.begin(), order.end(), earlier);
  return order;
}

void fill(Track& track, const store::StoredRun& run, const store::StoredChannel& stored,
          const Track* cold_junction) {
  for (const std::size_t i : by_time(stored)) {
    const double t_s = since_start(run, stored.t_ns[i]);
    const std::uint32_t bad = stored.flags[i] & instrument::kUnusable;
    if (bad != 0) {
      track.unusable.push_back({t_s, std::string{why_unusable(bad)}});
      continue;
    }
    std::optional<double> cold_degc;
    if (cold_junction != nullptr && !cold_junction->time_s.empty()) {
      cold_degc = read_off(cold_junction->all(), {&t_s, 1}).front();
    }
    const auto value = convert(*track.channel, stored.value[i], cold_degc);
    if (!value) {
      track.unusable.push_back({t_s, value.refusal().reason});
      continue;
    }
    // One instant, one reading: a series of instants that rise is what analysis takes.
    if (!track.time_s.empty() && t_s <= track.time_s.back()) continue;
    track.time_s.push_back(t_s);
    track.raw.push_back(stored.value[i]);
    track.value.push_back(*value);
    track.half_width_s.push_back(static_cast<double>(stored.half_width_ns[i]) * 1e-9);
    track.range.push_back(range_of(*track.channel, stored.value[i], stored.range[i]));
  }
}

const std::string& cold_junction_of(const setup::Channel& channel) {
  static const std::string kNone;
  return channel.conversion.thermocouple ? channel.conversion.thermocouple->cold_junction : kNone;
}

}  // namespace

series::TimeSeries Stretch::values() const {
  return {std::span{track->time_s}.subspan(first, size()), std::span{track->value}.subspan(first, size())};
}

series::TimeSeries Stretch::raws() const {
  return {std::span{track->time_s}.subspan(first, size()), std::span{track->raw}.subspan(first, size())};
}

Stretch stretch(const Track& track, double from_s, double to_s) {
  const auto begin = track.time_s.begin();
  const auto first = std::lower_bound(begin, track.time_s.end(), from_s);
  const auto last = std::upper_bound(first, track.time_s.end(), to_s);
  return {&track, static_cast<std::size_t>(first - begin), static_cast<std::size_t>(last - begin)};
}

Stretch whole_within(const Track& track, double from_s, double to_s, double integration_s) {
  Stretch part = stretch(track, from_s, to_s);
  const auto reach_s = [&](std::size_t i) { return track.half_width_s[i] + integration_s / 2.0; };
  while (part.first < part.last && track.time_s[part.first] - reach_s(part.first) < from_s) ++part.first;
  while (part.first < part.last && track.time_s[part.last - 1] + reach_s(part.last - 1) > to_s) --part.last;
  return part;
}

double since_start(const store::StoredRun& run, std::int64_t t_ns) {
  return static_cast<double>(t_ns - run.summary.started_ns) * 1e-9;
}

int range_of(const setup::Channel& channel, double raw, double named_range) {
  const auto& ranges = channel.ranges;
  if (ranges.empty()) return kNoRange;
  if (named_range > 0.0) {
    for (std::size_t i = 0; i < ranges.size(); ++i) {
      if (std::abs(ranges[i].upto - named_range) <= kSameRange * named_range) return static_cast<int>(i);
    }
  }
  const double magnitude = named_range > 0.0 ? named_range : std::abs(raw);
  for (std::size_t i = 0; i < ranges.size(); ++i) {
    if (magnitude <= ranges[i].upto) return static_cast<int>(i);
  }
  return magnitude <= kOverrange * ranges.back().upto ? static_cast<int>(ranges.size()) - 1 : kNoRange;
}

std::vector<Track> tracks_of(const store::StoredRun& run, const setup::Hookup& hookup) {
  std::vector<Track> tracks(hookup.channels.size());
  // Cold junctions first: the channels that name them are converted with them.
  for (const bool with_cold_junction : {false, true}) {
    for (std::size_t i = 0; i < tracks.size(); ++i) {
      const setup::Channel& channel = hookup.channels[i];
      const std::string& cold_name = cold_junction_of(channel);
      if (cold_name.empty() == with_cold_junction) continue;
      tracks[i].channel = &channel;
      const store::StoredChannel* stored = find(run, channel.name, tracks[i].index);
      if (stored == nullptr || channel.typed) continue;
      const Track* cold = nullptr;
      for (const Track& other : tracks) {
        if (!cold_name.empty() && other.channel != nullptr && other.channel->name == cold_name) cold = &other;
      }
      fill(tracks[i], run, *stored, cold);
    }
  }
  return tracks;
}

}  // namespace loadstair::evaluation
