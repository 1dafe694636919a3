#include "daemon/evaluation/live.h"

#include <algorithm>
#include <cmath>

#include "analysis/base/number.h"
#include "analysis/series/line.h"
#include "analysis/settling/settling.h"
#include "daemon/evaluation/thermal.h"

namespace loadstair::evaluation {
namespace {

/// A temperature that stood still within this still has an end to show, K.
constexpr double kLeastSpanK = 1.0;

std::string shown(double value) {
  return base::print_significant(value, 2);
}

/// One criterion as the step sees it now.
struct Judged {
  bool settled = false;
  std::string by, text;
  std::optional<double> wait_s;
};

Judged waits(const std::string& channel, const std::string& what,
             std::optional<double> wait_s = std::nullopt) {
  return {false, "", "waits for " + channel + ": " + what, wait_s};
}

double mean_of(std::span<const double> values) {
  double sum = 0.0;
  for (const double value : values) sum += value;
  return sum / static_cast<double>(values.size());
}

Judged judge_electrical(const setup::ElectricalSettle& wanted, const LiveTraces& traces) {
  const series::TimeSeries& trace = traces.electrical;
  if (trace.size() == 0) return waits(wanted.channel, "no good reading yet");
  const double covered_s = trace.time_s.back() - trace.time_s.front();
  const settling::Trace last = settling::since(trace, trace.time_s.back() - wanted.window_s);
  const double level = std::max(std::abs(mean_of(last.value)), traces.electrical_floor);
  const double limit_per_s = level * wanted.slope_percent_per_min / 100.0 / 60.0;
  if (!(limit_per_s > 0.0)) return waits(wanted.channel, "reads zero, so a slope in percent says nothing");
  const auto verdict =
      settling::settled_by_slope(trace, {.window_s = wanted.window_s, .limit_per_s = limit_per_s});
  const double left_s = std::max(0.0, wanted.window_s - covered_s);
  if (!verdict) {
    if (left_s > 0.0) {
      return waits(wanted.channel,
                   shown(covered_s) + " s of its " + shown(wanted.window_s) + " s window read", left_s);
    }
    return waits(wanted.channel, verdict.refusal().reason);
  }
  if (verdict->settled) return {true, "slope", "settled by slope", 0.0};
  if (left_s > 0.0) {
    return waits(wanted.channel, shown(covered_s) + " s of its " + shown(wanted.window_s) + " s window read",
                 left_s);
  }
  const auto line = series::fit_line(last);
  if (!line) return waits(wanted.channel, verdict->why, verdict->wait_s);
  const double percent_per_min = 6000.0 * line->slope_per_s / level;
  std::string what = "drifts " + shown(std::abs(percent_per_min)) + " %/min over " + shown(wanted.window_s) +
                     " s, wanted " + shown(wanted.slope_percent_per_min) + " %/min";
  if (std::abs(percent_per_min) <= wanted.slope_percent_per_min) what += "; its noise hides whether it does";
  return waits(wanted.channel, what, verdict->wait_s);
}

/// Beyond as much again as the step has shown, an end says nothing to a person who waits for it.
bool is_believable(const settling::Interval& end, const series::TimeSeries& trace) {
  const auto [least, most] = std::minmax_element(trace.value.begin(), trace.value.end());
  const double span = std::max(*most - *least, kLeastSpanK);
  return end.low >= *least - span && end.high <= *most + span;
}

Judged judge_thermal(const setup::ThermalSettle& wanted, const LiveTraces& traces, bool at_last_step,
                     std::optional<WindowState::End>& end) {
  const series::TimeSeries& trace = traces.thermal;
  if (trace.size() == 0) return waits(wanted.channel, "no good reading yet");
  const std::vector<double> ambient = read_off(traces.ambient, trace.time_s);
  const auto verdict = settling::settled_thermally(trace, ambient, criterion_of(wanted, !at_last_step));
  if (!verdict) return waits(wanted.channel, verdict.refusal().reason);
  if (verdict->end && is_believable(*verdict->end, trace)) {
    end =
        WindowState::End{verdict->end->value, verdict->end->low, verdict->end->high, verdict->end_predicted};
  }
  if (verdict->settled) {
    const std::string by = verdict->by == settling::SettledBy::prediction ? "prediction" : "rate";
    return {true, by, "settled by " + by, 0.0};
  }
  const auto change = change_over(trace, wanted.window_s);
  if (change && std::abs(*change) > wanted.change_k) {
    return waits(wanted.channel,
                 "changes " + shown(std::abs(*change)) + " K in " + shown(wanted.window_s) + " s, wanted " +
                     shown(wanted.change_k) + " K",
                 verdict->wait_s);
  }
  return waits(wanted.channel, verdict->why, verdict->wait_s);
}

}  // namespace

WindowState live_window(const setup::Step& step, const LiveTraces& traces, bool at_last_step) {
  WindowState state;
  state.settled = true;
  state.by = "no criterion";
  state.text = "no criterion";
  state.remaining_s = 0.0;
  const auto take = [&](const Judged& judged, const std::string& channel) {
    if (judged.settled) {
      if (state.settled) {
        state.by = judged.by;
        state.text = judged.text;
      }
      return;
    }
    // The first criterion that waits is told; how long still is the longest wait of all.
    const bool first = state.settled;
    if (first) {
      state.settled = false;
      state.by.clear();
      state.text = judged.text;
      state.waits_for = channel;
      state.remaining_s = judged.wait_s;
    } else if (state.remaining_s && judged.wait_s) {
      state.remaining_s = std::max(*state.remaining_s, *judged.wait_s);
    } else {
      state.remaining_s.reset();
    }
  };
  if (step.thermal) {
    const Judged judged = judge_thermal(*step.thermal, traces, at_last_step, state.thermal_end);
    state.thermal_settled = judged.settled;
    take(judged, step.thermal->channel);
  }
  if (step.electrical) {
    const Judged judged = judge_electrical(*step.electrical, traces);
    state.electrical_settled = judged.settled;
    const std::string thermal_by = state.by;
    take(judged, step.electrical->channel);
    // A temperature that is steady says more than the power does.
    if (state.settled && state.thermal_settled) {
      state.by = thermal_by;
      state.text = "settled by " + thermal_by;
    }
  }
  if (!step.electrical) state.electrical_settled = true;
  if (!step.thermal) state.thermal_settled = true;
  return state;
}

}  // namespace loadstair::evaluation
