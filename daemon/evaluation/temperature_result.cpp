#include "daemon/evaluation/temperature_result.h"

#include <algorithm>
#include <cmath>
#include <utility>

#include "analysis/settling/settling.h"
#include "daemon/evaluation/quantity.h"
#include "daemon/evaluation/thermal.h"

namespace loadstair::evaluation {
namespace {

using estimate::Distribution;
using estimate::Estimate;
using estimate::Quoted;

/// Half-width over standard deviation of a normal 95 % interval.
constexpr double kNormal95 = 1.959963984540054;

const ChannelValue* find(const std::vector<ChannelValue>& channels, const std::string& name) {
  for (const ChannelValue& value : channels) {
    if (!name.empty() && value.channel->name == name) return &value;
  }
  return nullptr;
}

const Track* find_track(const std::vector<Track>& tracks, const std::string& name) {
  for (const Track& track : tracks) {
    if (!name.empty() && track.channel != nullptr && track.channel->name == name) return &track;
  }
  return nullptr;
}

/// The step's own criterion where it is about this channel; else the same criterion on this channel.
std::optional<settling::Verdict> verdict_of(const setup::Step* plan, const std::vector<Track>& tracks,
                                            const setup::TemperaturePoint& point,
                                            const WindowContext& context, double begun_s, bool last) {
  const Track* track = find_track(tracks, point.channel);
  if (plan == nullptr || !plan->thermal || track == nullptr) return std::nullopt;
  const Stretch approach = stretch(*track, begun_s, context.to_s);
  if (approach.size() < 2) return std::nullopt;
  const series::TimeSeries trace = approach.values();
  std::vector<double> ambient;
  if (const Track* other = find_track(tracks, point.ambient_channel)) {
    ambient = read_off(stretch(*other, begun_s, context.to_s).values(), trace.time_s);
  }
  const auto verdict = settling::settled_thermally(trace, ambient, criterion_of(*plan->thermal, !last));
  return verdict ? std::optional{*verdict} : std::nullopt;
}

Estimate normal(double half_width, const WindowContext& context, const std::string& name) {
  return Estimate{0.0,
                  estimate::make_type_b(estimate::key::window(context.run, context.step, name), name,
                                        Distribution::normal),
                  half_width / kNormal95};
}

/// Greatest less least value of the step's approach: no more than was seen to move is claimed to move still.
double observed_span(const Track& track, double begun_s, const WindowContext& context) {
  const Stretch approach = stretch(track, begun_s, context.to_s);
  if (approach.size() == 0) return 0.0;
  const auto values = approach.values().value;
  const auto [least, most] = std::minmax_element(values.begin(), values.end());
  return *most - *least;
}

/// The end as measured: the line at the end of the window, and what may still come, one-sided.
Estimate measured_end(const ChannelValue& value, const std::optional<settling::Verdict>& verdict,
                      const WindowContext& context, double begun_s) {
  double end = value.middle;
  Estimate extra{0.0};
  if (value.window) {
    const double after_middle_s = context.to_s - value.window->middle_s;
    end = value.window->value + value.window->slope_per_s * after_middle_s;
    extra = normal(kNormal95 * value.window->slope_u_per_s * after_middle_s, context,
                   "reading off the end of the window, " + value.channel->name);
  }
  Estimate out = extra.with_value(end);
  if (verdict && verdict->end && value.stretch.track != nullptr) {
    const double span = observed_span(*value.stretch.track, begun_s, context);
    const double low = std::clamp(verdict->end->low - end, -span, 0.0);
    const double high = std::clamp(verdict->end->high - end, 0.0, span);
    const std::string name = "remaining change of " + value.channel->name;
    out =
        out + estimate::bounded(low, high,
                                estimate::make_type_b(estimate::key::window(context.run, context.step, name),
                                                      name, Distribution::rectangular));
  }
  return out;
}

Estimate predicted_end(const ChannelValue& value, const settling::Interval& end,
                       const WindowContext& context) {
  const double half_width = std::max(end.high - end.value, end.value - end.low);
  return normal(half_width, context, "prediction of " + value.channel->name).with_value(end.value);
}

TemperatureResult result_of(const setup::TemperaturePoint& point, const ChannelValue& value,
                            const std::optional<settling::Verdict>& verdict, const WindowContext& context,
                            double begun_s) {
  TemperatureResult out;
  out.place = point.place;
  out.channel = point.channel;
  const bool unknown = !value.unknown.empty();
  const Quoted errors = unknown ? value.plain : value.with_noise(context);
  if (!errors) {
    out.end = missing("degC", errors.refusal().text());
    return out;
  }
  const bool predicted = verdict && verdict->by == settling::SettledBy::prediction && verdict->end;
  const Estimate end = predicted ? predicted_end(value, *verdict->end, context)
                                 : measured_end(value, verdict, context, begun_s);
  out.how = predicted ? "predicted" : "measured";
  out.end = unknown ? without_uncertainty(end.value(), "degC", value.unknown)
                    : to_quantity(end + errors->with_value(0.0), "degC");
  if (!out.end.known) out.how.clear();
  return out;
}

}  // namespace

std::vector<TemperatureResult> temperatures_of(const setup::Hookup& hookup, const setup::Step* plan,
                                               const std::vector<Track>& tracks,
                                               const std::vector<ChannelValue>& channels,
                                               const WindowContext& context, double begun_s, bool last) {
  std::vector<TemperatureResult> out;
  for (const setup::TemperaturePoint& point : hookup.temperatures) {
    const ChannelValue* value = find(channels, point.channel);
    if (value == nullptr) continue;
    out.push_back(
        result_of(point, *value, verdict_of(plan, tracks, point, context, begun_s, last), context, begun_s));
    if (const ChannelValue* ambient = find(channels, point.ambient_channel)) {
      out.back().ambient = either(ambient->with_noise(context), ambient->plain, "degC", ambient->unknown);
    }
  }
  return out;
}

}  // namespace loadstair::evaluation
