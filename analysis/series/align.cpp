#include "analysis/series/align.h"

#include <algorithm>
#include <array>
#include <cmath>

#include "analysis/series/checks.h"

namespace loadstair::series {

namespace {

constexpr std::size_t kParabolaReadings = 9;

struct Owned {
  std::vector<double> time_s;
  std::vector<double> value;
};

/// Readings of one instant become their mean, so that instants increase strictly.
Owned merged(const TimeSeries& data) {
  Owned out;
  std::size_t i = 0;
  while (i < data.size()) {
    double sum = 0;
    std::size_t many = 0;
    const double t = data.time_s[i];
    for (; i < data.size() && data.time_s[i] == t; ++i, ++many) sum += data.value[i];
    out.time_s.push_back(t);
    out.value.push_back(sum / static_cast<double>(many));
  }
  return out;
}

struct Bend {
  double slope = 0;
  double curvature = 0;
};

/// Least-squares parabola over a few readings: slope in its middle and second derivative.
Bend parabola(std::span<const double> time_s, std::span<const double> value) {
  const std::size_t count = time_s.size();
  const double middle = (time_s.front() + time_s.back()) / 2;
  const double half = (time_s.back() - time_s.front()) / 2;
  // Orthogonal polynomials over the instants scaled to [-1, 1].
  std::vector<double> x(count);
  double mean = 0;
  double mean_y = 0;
  for (std::size_t i = 0; i < count; ++i) {
    x[i] = (time_s[i] - middle) / half;
    mean += x[i];
    mean_y += value[i];
  }
  mean /= static_cast<double>(count);
  mean_y /= static_cast<double>(count);
  double s2 = 0;
  double s3 = 0;
  double sy = 0;
  for (std::size_t i = 0; i < count; ++i) {
    const double d = x[i] - mean;
    s2 += d * d;
    s3 += d * d * d;
    sy += d * (value[i] - mean_y);
  }
  const double spread = s2 / static_cast<double>(count);
  double qq = 0;
  double qy = 0;
  for (std::size_t i = 0; i < count; ++i) {
    const double d = x[i] - mean;
    const double q = d * d - spread - d * s3 / s2;
    qq += q * q;
    qy += q * (value[i] - mean_y);
  }
  const double square = count > 2 && qq > 0 ? qy / qq : 0;
  const double linear = sy / s2 - square * s3 / s2 - 2 * square * mean;
  return {linear / half, 2 * square / (half * half)};
}

double interpolate(const Owned& from, std::size_t right, double t) {
  const double t0 = from.time_s[right - 1];
  const double t1 = from.time_s[right];
  const double share = (t - t0) / (t1 - t0);
  return from.value[right - 1] + share * (from.value[right] - from.value[right - 1]);
}

void add_bounds(const Owned& from, double half_width_s, Aligned& out) {
  const std::size_t count = from.time_s.size();
  if (count < 2) return;
  const std::size_t many = std::min(kParabolaReadings, count);
  double longest = 0;
  for (std::size_t i = 1; i < count; ++i) longest = std::max(longest, from.time_s[i] - from.time_s[i - 1]);
  for (std::size_t first = 0; first + many <= count; ++first) {
    const Bend bend =
        parabola(std::span{from.time_s}.subspan(first, many), std::span{from.value}.subspan(first, many));
    out.curvature_bound = std::max(out.curvature_bound, longest * longest / 8 * std::abs(bend.curvature));
    out.timing_bound = std::max(out.timing_bound, half_width_s * std::abs(bend.slope));
  }
}

std::size_t longest_interval(std::span<const TimeSeries> series) {
  std::size_t out = 0;
  double longest = -1;
  for (std::size_t i = 0; i < series.size(); ++i) {
    const auto& t = series[i].time_s;
    const double interval = t.size() > 1 ? (t.back() - t.front()) / static_cast<double>(t.size() - 1) : 0;
    if (interval > longest) {
      longest = interval;
      out = i;
    }
  }
  return out;
}

}  // namespace

base::Outcome<Aligned> align(const TimeSeries& from, std::span<const double> at_s, double half_width_s) {
  if (auto fault = fault_of(from)) return *fault;
  if (auto fault = fault_of({at_s, at_s})) {
    return base::Refusal{fault->place, "wanted instants: " + fault->reason};
  }
  const Owned readings = merged(from);
  Aligned out;
  std::size_t right = 0;
  for (std::size_t i = 0; i < at_s.size(); ++i) {
    const double t = at_s[i];
    if (t < readings.time_s.front() || t > readings.time_s.back()) continue;
    while (readings.time_s[right] < t) ++right;
    out.value.push_back(readings.time_s[right] == t ? readings.value[right]
                                                    : interpolate(readings, right, t));
    out.instant.push_back(i);
  }
  add_bounds(readings, half_width_s, out);
  return out;
}

base::Outcome<AlignedSet> align_all(std::span<const TimeSeries> series,
                                    std::span<const double> half_width_s) {
  if (series.empty() || series.size() != half_width_s.size()) {
    return base::Refusal{"", "aligning needs at least one series and a half-width for each"};
  }
  for (const TimeSeries& one : series) {
    if (auto fault = fault_of(one)) return *fault;
  }
  const std::size_t reference = longest_interval(series);
  double from_s = series[reference].time_s.front();
  double to_s = series[reference].time_s.back();
  for (const TimeSeries& one : series) {
    from_s = std::max(from_s, one.time_s.front());
    to_s = std::min(to_s, one.time_s.back());
  }
  AlignedSet out;
  for (const double t : series[reference].time_s) {
    const bool repeated = !out.time_s.empty() && out.time_s.back() == t;
    if (t >= from_s && t <= to_s && !repeated) out.time_s.push_back(t);
  }
  if (out.time_s.empty()) return base::Refusal{"", "no instant is covered by all channels of the window"};
  for (std::size_t i = 0; i < series.size(); ++i) {
    const double half_width = i == reference ? 0 : half_width_s[i] + half_width_s[reference];
    auto one = align(series[i], out.time_s, half_width);
    if (!one) return one.refusal();
    out.value.push_back(std::move(one->value));
    out.curvature_bound.push_back(i == reference ? 0 : one->curvature_bound);
    out.timing_bound.push_back(one->timing_bound);
  }
  return out;
}

double fluctuation_bound(double deviation_a, double deviation_b) {
  return std::abs(deviation_a) * std::abs(deviation_b);
}

}  // namespace loadstair::series
