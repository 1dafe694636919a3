#include "daemon/evaluation/temperature_result.h"

#include <algorithm>
#include <cmath>
#include <utility>

#include "analysis/settling/hold_out.h"
#include "analysis/settling/settling.h"
#include "analysis/settling/thermal_end.h"
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

/// A point's readings since the set point, with the ambient at the same instants where there is one.
struct Approach {
  Stretch readings;
  std::vector<double> ambient;

  [[nodiscard]] series::TimeSeries trace() const { return readings.values(); }
};

std::optional<Approach> approach_of(const std::vector<Track>& tracks, const setup::TemperaturePoint& point,
                                    const WindowContext& context, const StepThermal& thermal) {
  const Track* track = find_track(tracks, point.channel);
  if (thermal.plan == nullptr || !thermal.plan->thermal || track == nullptr) return std::nullopt;
  Approach out{stretch(*track, thermal.begun_s, context.to_s), {}};
  if (out.readings.size() < 2) return std::nullopt;
  if (const Track* other = find_track(tracks, point.ambient_channel)) {
    out.ambient = read_off(stretch(*other, thermal.begun_s, context.to_s).values(), out.trace().time_s);
  }
  return out;
}

/// The step's own criterion where it is about this channel; else the same criterion on this channel.
std::optional<settling::Verdict> verdict_of(const std::optional<Approach>& approach,
                                            const StepThermal& thermal) {
  if (!approach) return std::nullopt;
  const auto verdict = settling::settled_thermally(approach->trace(), approach->ambient,
                                                   criterion_of(*thermal.plan->thermal, !thermal.last));
  return verdict ? std::optional{*verdict} : std::nullopt;
}

/// In the last step: what a prediction would have said, had it been allowed to end the step.
std::optional<TemperatureResult::HoldOut> hold_out_of(const std::optional<Approach>& approach,
                                                      const StepThermal& thermal) {
  if (!approach || !thermal.last) return std::nullopt;
  constexpr int kInstants = 20;
  const auto found = settling::hold_out(approach->trace(), approach->ambient,
                                        criterion_of(*thermal.plan->thermal, false), {kInstants});
  if (!found || !found->has_value()) return std::nullopt;
  const settling::HoldOut& held = **found;
  TemperatureResult::HoldOut out;
  out.after_s = held.after_s + approach->trace().time_s.front() - thermal.begun_s;
  out.predicted = held.predicted.value;
  out.low = held.predicted.low;
  out.high = held.predicted.high;
  out.measured = held.measured.value;
  out.held = held.held;
  out.text = held.text;
  return out;
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

EndTemperature end_of(const setup::TemperaturePoint& point, const ChannelValue& value,
                      const std::optional<settling::Verdict>& verdict, const WindowContext& context,
                      double begun_s, Quoted& with_errors) {
  EndTemperature out;
  TemperatureResult& result = out.result;
  result.place = point.place;
  result.channel = point.channel;
  const bool unknown = !value.unknown.empty();
  const Quoted errors = unknown ? value.plain : value.with_noise(context);
  if (!errors) {
    with_errors = errors.refusal();
    result.end = missing("degC", errors.refusal().text());
    return out;
  }
  const bool predicted = verdict && verdict->by == settling::SettledBy::prediction && verdict->end;
  const Estimate end = predicted ? predicted_end(value, *verdict->end, context)
                                 : measured_end(value, verdict, context, begun_s);
  result.how = predicted ? "predicted" : "measured";
  // The end is read off where the window ends, and what may still come is a source of its own: the drift
  // within the window is in both already.
  const std::string drift = estimate::key::window(context.run, context.step, "drift");
  const bool rest_known = verdict && verdict->end;
  with_errors = end + errors->with_value(0.0).filtered(
                          [&](const estimate::Source& source) { return !rest_known || source.key != drift; });
  result.end =
      unknown ? without_uncertainty(end.value(), "degC", value.unknown) : to_quantity(*with_errors, "degC");
  if (!result.end.known) {
    result.how.clear();
    return out;
  }
  out.remaining_k = end - value.middle;
  return out;
}

/// Thermal resistance, and the case in the hottest room, from the end and the ambient; `unknown` says what is
/// not known of their uncertainties.
void fill_from_ambient(TemperatureResult& result, const Quoted& end, const Quoted& ambient,
                       const std::string& unknown, const StepThermal& thermal) {
  if (!end || !ambient) return;
  const Quoted hot = settling::at_highest_ambient(*end, *ambient, thermal.highest_ambient_c);
  const Quoted resistance = thermal.loss ? settling::thermal_resistance(*end, *ambient, *thermal.loss)
                                         : Quoted{thermal.loss.refusal()};
  const auto quantity = [&](const Quoted& found, const char* unit) {
    if (unknown.empty() || !found) return to_quantity(found, unit);
    return without_uncertainty(found->value(), unit, unknown);
  };
  result.at_highest_ambient = quantity(hot, "degC");
  result.thermal_resistance = quantity(resistance, "K/W");
}

}  // namespace

std::vector<EndTemperature> temperatures_of(const setup::Hookup& hookup, const std::vector<Track>& tracks,
                                            const std::vector<ChannelValue>& channels,
                                            const WindowContext& context, const StepThermal& thermal) {
  std::vector<EndTemperature> out;
  for (const setup::TemperaturePoint& point : hookup.temperatures) {
    const ChannelValue* value = find(channels, point.channel);
    if (value == nullptr) continue;
    const auto approach = approach_of(tracks, point, context, thermal);
    Quoted end = base::Refusal{};
    out.push_back(end_of(point, *value, verdict_of(approach, thermal), context, thermal.begun_s, end));
    TemperatureResult& result = out.back().result;
    result.hold_out = hold_out_of(approach, thermal);
    const ChannelValue* ambient = find(channels, point.ambient_channel);
    if (ambient == nullptr) continue;
    const Quoted room = ambient->with_noise(context);
    result.ambient = either(room, ambient->plain, "degC", ambient->unknown);
    const std::string unknown = value->unknown.empty() ? ambient->unknown : value->unknown;
    fill_from_ambient(result, end, unknown.empty() ? room : ambient->plain, unknown, thermal);
  }
  return out;
}

}  // namespace loadstair::evaluation
