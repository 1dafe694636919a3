#include "drivers/rehearsal/history.h"

#include <algorithm>
#include <cmath>

#include "analysis/base/require.h"

namespace loadstair::rehearsal {

namespace {

void add(SignalMeans& sum, const SignalMeans& step, double weight) {
  sum.mean += weight * step.mean;
  sum.mean_square += weight * step.mean_square;
  sum.mean_rectified += weight * step.mean_rectified;
}

void add(PortStep& sum, const PortStep& step, double weight) {
  for (std::size_t n = 0; n < 3; ++n) {
    add(sum.voltage[n], step.voltage[n], weight);
    sum.meter_power_w[n] += weight * step.meter_power_w[n];
  }
  add(sum.current, step.current, weight);
  add(sum.meter_current, step.meter_current, weight);
  sum.power_w += weight * step.power_w;
}

void add(StepMeans& sum, const PlantStep& step, double weight) {
  add(sum.input, step.input, weight);
  add(sum.output, step.output, weight);
  sum.loss_w += weight * step.loss_w;
  sum.load_power_w += weight * step.load_power_w;
  sum.junction_c += weight * step.junction_c;
  sum.case_c += weight * step.case_c;
  sum.ambient_c += weight * step.ambient_c;
}

}  // namespace

History::History(double step_s, double kept_s)
    : step_s_{step_s}, capacity_{static_cast<std::size_t>(std::ceil(kept_s / step_s)) + 2}, energies_(1) {
  ring_.reserve(capacity_);
}

void History::push(const PlantStep& step) {
  const std::size_t index = steps();
  if (ring_.size() < capacity_) {
    ring_.push_back(step);
  } else {
    ring_[index % capacity_] = step;
  }
  const Energies& before = energies_.back();
  energies_.push_back({before.input_j + step.input.power_w * step_s_,
                       before.output_j + step.output.power_w * step_s_, static_cast<float>(step.junction_c),
                       static_cast<float>(step.case_c), static_cast<float>(step.ambient_c)});
}

const PlantStep& History::at(double time_s) const {
  base::require(steps() > 0, "a history is looked into only after its first step");
  const std::size_t first = steps() > capacity_ ? steps() - capacity_ : 0;
  const double place = std::floor(time_s / step_s_ + 1e-9);
  const auto index = static_cast<std::size_t>(
      std::clamp(place, static_cast<double>(first), static_cast<double>(steps() - 1)));
  return ring_[index % capacity_];
}

StepMeans History::means(double from_s, double to_s) const {
  if (steps() == 0) return {};
  const double kept_from = steps() > capacity_ ? static_cast<double>(steps() - capacity_) * step_s_ : 0.0;
  const double from = std::clamp(from_s, kept_from, end_s());
  const double to = std::clamp(to_s, kept_from, end_s());
  const PlantStep& last = at(to - 1e-6 * step_s_);
  if (to - from < 1e-6 * step_s_) return last;
  StepMeans sum;
  sum.wave = last.wave;
  sum.frequency_hz = last.frequency_hz;
  sum.running = last.running;
  sum.folded_back = last.folded_back;
  sum.fan_on = last.fan_on;
  const auto first = static_cast<std::size_t>(from / step_s_ + 1e-9);
  const auto end = std::min(steps(), static_cast<std::size_t>(std::ceil(to / step_s_ - 1e-9)));
  for (std::size_t i = first; i < end; ++i) {
    const double begins = static_cast<double>(i) * step_s_;
    const double covered = std::min(to, begins + step_s_) - std::max(from, begins);
    if (covered > 0.0) add(sum, ring_[i % capacity_], covered / (to - from));
  }
  return sum;
}

History::Energies History::energies_at(double time_s) const {
  const double place = std::clamp(time_s / step_s_, 0.0, static_cast<double>(steps()));
  const auto index = std::min(static_cast<std::size_t>(place), steps());
  Energies at = energies_[index];
  if (index < steps()) {
    const double share = place - static_cast<double>(index);
    const Energies& next = energies_[index + 1];
    at.input_j += share * (next.input_j - at.input_j);
    at.output_j += share * (next.output_j - at.output_j);
    if (share > 0.5) {
      at.junction_c = next.junction_c;
      at.case_c = next.case_c;
      at.ambient_c = next.ambient_c;
    }
  }
  return at;
}

Truth History::truth(double from_s, double to_s) const {
  const double from = std::clamp(from_s, 0.0, end_s());
  const double to = std::clamp(to_s, 0.0, end_s());
  const Energies before = energies_at(from);
  const Energies after = energies_at(to);
  Truth truth;
  truth.junction_c = after.junction_c;
  truth.case_c = after.case_c;
  truth.ambient_c = after.ambient_c;
  if (to <= from) return truth;
  truth.input_power_w = (after.input_j - before.input_j) / (to - from);
  truth.output_power_w = (after.output_j - before.output_j) / (to - from);
  truth.loss_w = truth.input_power_w - truth.output_power_w;
  truth.efficiency = truth.input_power_w > 0.0 ? truth.output_power_w / truth.input_power_w : 0.0;
  return truth;
}

}  // namespace loadstair::rehearsal
