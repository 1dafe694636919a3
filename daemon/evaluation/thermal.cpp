#include "daemon/evaluation/thermal.h"

#include <algorithm>

namespace loadstair::evaluation {
namespace {

/// Mean of the readings within [from_s, to_s]; the nearest one when there is none.
double mean_between(const series::TimeSeries& trace, double from_s, double to_s) {
  const auto first = std::lower_bound(trace.time_s.begin(), trace.time_s.end(), from_s);
  const auto last = std::upper_bound(first, trace.time_s.end(), to_s);
  if (first == last) {
    const auto at = first == trace.time_s.end() ? first - 1 : first;
    return trace.value[static_cast<std::size_t>(at - trace.time_s.begin())];
  }
  double sum = 0.0;
  for (auto at = first; at != last; ++at)
    sum += trace.value[static_cast<std::size_t>(at - trace.time_s.begin())];
  return sum / static_cast<double>(last - first);
}

}  // namespace

settling::ThermalCriterion criterion_of(const setup::ThermalSettle& thermal, bool may_end) {
  settling::ThermalCriterion criterion;
  criterion.rate.change = thermal.change_k;
  criterion.rate.window_s = thermal.window_s;
  criterion.rate.count = thermal.count;
  criterion.rate.hold_s = thermal.hold_s;
  criterion.prediction = settling::PredictionCriterion{.tolerance = thermal.prediction_tolerance_k,
                                                       .slowest_tau_s = thermal.slowest_tau_s,
                                                       .may_end_step = thermal.by_prediction && may_end};
  return criterion;
}

std::vector<double> read_off(const series::TimeSeries& from, std::span<const double> at_s) {
  std::vector<double> out;
  if (from.size() == 0) return out;
  out.reserve(at_s.size());
  std::size_t right = 0;
  for (const double t : at_s) {
    while (right < from.size() && from.time_s[right] < t) ++right;
    if (right == 0) {
      out.push_back(from.value.front());
    } else if (right == from.size()) {
      out.push_back(from.value.back());
    } else {
      const double length = from.time_s[right] - from.time_s[right - 1];
      const double share = length > 0.0 ? (t - from.time_s[right - 1]) / length : 1.0;
      out.push_back(from.value[right - 1] + share * (from.value[right] - from.value[right - 1]));
    }
  }
  return out;
}

std::optional<double> change_over(const series::TimeSeries& trace, double window_s) {
  if (trace.size() < 2) return std::nullopt;
  const double end_s = trace.time_s.back();
  const double begin_s = end_s - window_s;
  if (trace.time_s.front() > begin_s) return std::nullopt;
  const double part_s = window_s / 20.0;
  return mean_between(trace, end_s - part_s, end_s) - mean_between(trace, begin_s, begin_s + part_s);
}

}  // namespace loadstair::evaluation
