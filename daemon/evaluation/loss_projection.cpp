#include "daemon/evaluation/loss_projection.h"

#include <algorithm>
#include <utility>

#include "analysis/settling/thermal_end.h"
#include "daemon/evaluation/port_series.h"
#include "daemon/evaluation/quantity.h"
#include "daemon/evaluation/thermal.h"

namespace loadstair::evaluation {
namespace {

/// The beginning of a soak that is left out: source and load still find their levels (common practice, no
/// source).
constexpr double kLeftOut = 0.1;

const Track* track_of(const std::vector<Track>& tracks, const std::string& channel) {
  const auto found = std::find_if(tracks.begin(), tracks.end(), [&](const Track& track) {
    return track.channel != nullptr && track.channel->name == channel;
  });
  return found == tracks.end() ? nullptr : &*found;
}

base::Outcome<settling::LossAtEnd> at_end(const StepValues& values, const Track& temperature,
                                          const efficiency::StepResult& totals,
                                          const estimate::Estimate& remaining_k, double begun_s) {
  const WindowContext& context = values.context;
  const double from_s = begun_s + kLeftOut * (context.to_s - begun_s);
  const Stretch readings = stretch(temperature, from_s, context.to_s);
  const auto loss = loss_between(values, totals, from_s, context.to_s);
  if (!loss || readings.size() == 0) {
    return base::Refusal{"loss at the end temperature",
                         "loss and temperature were not read all through the soak"};
  }
  const auto slope = settling::loss_with_temperature(read_off(readings.values(), loss->time_s), loss->loss_w);
  if (!slope) return slope.refusal();
  return settling::project_loss(*slope, {*totals.input_power, *totals.loss, *totals.efficiency, remaining_k,
                                         context.run, context.step});
}

}  // namespace

void fill_projection(StepResult& result, const StepValues& values, const std::vector<Track>& tracks,
                     const efficiency::StepResult& totals, std::span<const EndTemperature> ends,
                     double begun_s) {
  if (!totals.input_power || !totals.loss || !totals.efficiency) return;
  for (const EndTemperature& end : ends) {
    const Track* track = track_of(tracks, end.result.channel);
    if (!end.remaining_k || track == nullptr || track->value.size() < 2) continue;
    const auto found = at_end(values, *track, totals, *end.remaining_k, begun_s);
    if (!found) {
      result.projection_text = found.refusal().text();
      return;
    }
    result.loss_projected = to_quantity(found->loss_w, "W");
    result.efficiency_projected = to_quantity(found->efficiency, "1");
    result.projection_text = end.result.place + ": " + found->text;
    return;
  }
}

}  // namespace loadstair::evaluation
