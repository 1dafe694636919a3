#include "analysis/efficiency/common_load.h"

#include <cmath>

namespace loadstair::efficiency {

namespace {

estimate::SourcePtr source_of(const std::string& run, const std::string& label, const std::string& part) {
  return estimate::make_type_b(estimate::key::window(run, label, part), part + " at " + label,
                               estimate::Distribution::rectangular);
}

/// d loss / d P_out near a level.
Estimate slope_at(const ComparedRun& run, std::size_t at) {
  const CurvePoint& point = run.points[at];
  if (run.model != nullptr && !run.model->lack_of_fit) return run.model->slope_at(point.output_power.value());
  const auto source = source_of(run.run, point.label, "slope of the loss");
  const std::size_t low = at == 0 ? 0 : at - 1;
  const std::size_t high = at + 1 < run.points.size() ? at + 1 : at;
  const Estimate span = run.points[high].output_power - run.points[low].output_power;
  if (!(span.value() > 0)) {
    return estimate::bounded(0, 2 * point.loss.value() / point.output_power.value(), source);
  }
  const auto between = [&](std::size_t from, std::size_t to) {
    return (run.points[to].loss.value() - run.points[from].loss.value()) /
           (run.points[to].output_power.value() - run.points[from].output_power.value());
  };
  const Estimate slope = (run.points[high].loss - run.points[low].loss) / span;
  // The curve bends between the levels. At an end the tangent of p0 + p1 P + p2 P^2 without negative terms is
  // off the secant by no more than the secant itself; elsewhere both sides' secants bound it.
  const bool inner = low < at && at < high;
  const double bend = inner ? std::abs(between(at, high) - between(low, at)) / 2 : std::abs(slope.value());
  return slope + estimate::bounded(-bend, bend, source);
}

}  // namespace

AtLoad at_load(const ComparedRun& run, std::size_t at, double load_w) {
  const CurvePoint& point = run.points[at];
  const Estimate loss = point.loss + slope_at(run, at) * (load_w - point.output_power);
  // As a shift of the measured efficiency: that one has noise of its own, found on its own series.
  const Estimate shift = load_w / (load_w + loss) - point.output_power / (point.output_power + point.loss);
  return {point.efficiency + shift, loss};
}

AtLoad with_surroundings(const AtLoad& other, double load_w, const Around& reference, const Around& around,
                         const std::string& run, const std::string& label) {
  AtLoad out = other;
  const auto add = [&](double relative, const std::string& part) {
    const double half_width_w = std::abs(relative * other.loss.value());
    if (!(half_width_w > 0)) return;
    const Estimate of_loss =
        estimate::bounded(-half_width_w, half_width_w, source_of(run, label, "another " + part));
    const double input_w = load_w + other.loss.value();
    out.loss = out.loss + of_loss;
    out.efficiency = out.efficiency - (load_w / (input_w * input_w)) * of_loss;
  };
  if (reference.input_voltage_v && around.input_voltage_v) {
    add(kVoltageExponent * (*around.input_voltage_v / *reference.input_voltage_v - 1), "input voltage");
  }
  if (reference.ambient_c && around.ambient_c)
    add(kLossPerKelvin * (*around.ambient_c - *reference.ambient_c), "ambient");
  return out;
}

}  // namespace loadstair::efficiency
