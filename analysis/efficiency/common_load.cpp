#include "analysis/efficiency/common_load.h"

#include <cmath>

namespace loadstair::efficiency {

namespace {

estimate::SourcePtr source_of(const std::string& run, const std::string& label, const std::string& part) {
  return estimate::make_type_b(estimate::key::window(run, label, part), part + " at " + label,
                               estimate::Distribution::rectangular);
}

/// How the other run's loss changes on its way to the reference's surroundings.
struct Change {
  double by = 0;        ///< V or K from the other run to the reference
  double relative = 0;  ///< half-width of the loss, where no slope is known
  std::string what;
};

}  // namespace

AtLoad at_load(const ComparedRun& run, std::size_t at, double load_w) {
  const CurvePoint& point = run.points[at];
  const LossCurve curve{run.run, run.points, run.pieces};
  const Estimate loss = point.loss + slope_near(curve, at) * (load_w - point.output_power);
  // As a shift of the measured efficiency: that one has noise of its own, found on its own series.
  const Estimate shift = load_w / (load_w + loss) - point.output_power / (point.output_power + point.loss);
  return {point.efficiency + shift, loss};
}

AtLoad with_surroundings(const AtLoad& other, double load_w, const Around& reference, const Around& around,
                         const std::string& run, const std::string& label) {
  AtLoad out = other;
  const auto add = [&](const Estimate& of_loss) {
    const Estimate before = load_w / (load_w + out.loss);
    out.loss = out.loss + of_loss;
    out.efficiency = out.efficiency + (load_w / (load_w + out.loss) - before);
  };
  const auto move = [&](const Change& change, const std::optional<Estimate>& own,
                        const std::optional<Estimate>& others) {
    if (change.by == 0) return;
    if (own || others) return add((own ? *own : *others) * change.by);
    const double half_width_w = std::abs(change.relative * other.loss.value());
    if (half_width_w > 0) {
      add(estimate::bounded(-half_width_w, half_width_w, source_of(run, label, "another " + change.what)));
    }
  };
  if (reference.input_voltage_v && around.input_voltage_v) {
    move({*reference.input_voltage_v - *around.input_voltage_v,
          kVoltageExponent * (*around.input_voltage_v / *reference.input_voltage_v - 1), "input voltage"},
         around.loss_per_volt, reference.loss_per_volt);
  }
  if (reference.ambient_c && around.ambient_c) {
    const double by_k = *reference.ambient_c - *around.ambient_c;
    move({by_k, kLossPerKelvin * by_k, "ambient"}, around.loss_per_kelvin, reference.loss_per_kelvin);
  }
  return out;
}

}  // namespace loadstair::efficiency
