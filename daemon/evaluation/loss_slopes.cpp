#include "daemon/evaluation/loss_slopes.h"

#include <cmath>
#include <optional>

#include "analysis/efficiency/loss_pieces.h"

namespace loadstair::evaluation {
namespace {

using estimate::Estimate;

/// Nearer than this share, two voltages are one: the slope of the line would be noise.
constexpr double kSameVoltage = 0.01;

/// One level at another input voltage, at the point's load.
struct Elsewhere {
  double voltage_v = 0.0;
  Estimate loss;
};

/// The nearest other voltage on one side of the point's.
std::optional<Elsewhere> nearest(const std::vector<StepOutcome>& outcomes, const efficiency::LossCurve& curve,
                                 std::size_t at, double voltage_v, double within_w, bool higher) {
  const efficiency::CurvePoint& point = curve.points[at];
  std::optional<Elsewhere> out;
  for (const StepOutcome& outcome : outcomes) {
    const auto there_v = input_voltage_of(outcome.result);
    if (outcome.kind != setup::StepKind::level || !there_v || !outcome.powers.loss ||
        !outcome.powers.output_power)
      continue;
    if ((*there_v > voltage_v) != higher || std::abs(*there_v - voltage_v) <= kSameVoltage * voltage_v)
      continue;
    const Estimate by_w = point.output_power - *outcome.powers.output_power;
    if (std::abs(by_w.value()) > within_w) continue;
    if (out && std::abs(out->voltage_v - voltage_v) <= std::abs(*there_v - voltage_v)) continue;
    out = Elsewhere{*there_v, *outcome.powers.loss + efficiency::slope_near(curve, at) * by_w};
  }
  return out;
}

Estimate line(const Elsewhere& there, const Estimate& loss, double voltage_v) {
  return (there.loss - loss) / (there.voltage_v - voltage_v);
}

std::optional<Estimate> slope_of(const std::vector<StepOutcome>& outcomes, const efficiency::LossCurve& curve,
                                 std::size_t at, double voltage_v, double within_w) {
  const Estimate& loss = curve.points[at].loss;
  const auto below = nearest(outcomes, curve, at, voltage_v, within_w, false);
  const auto above = nearest(outcomes, curve, at, voltage_v, within_w, true);
  if (!below && !above) return std::nullopt;
  const auto source = estimate::make_type_b(
      estimate::key::window(curve.run, curve.points[at].label, "loss over input voltage"),
      "loss over input voltage at " + curve.points[at].label, estimate::Distribution::rectangular);
  if (below && above) {
    const Estimate first = line(*below, loss, voltage_v);
    const Estimate second = line(*above, loss, voltage_v);
    const double half = std::abs(second.value() - first.value()) / 2.0;
    return 0.5 * (first + second) + estimate::bounded(-half, half, source);
  }
  const Estimate only = line(below ? *below : *above, loss, voltage_v);
  return only + estimate::bounded(-std::abs(only.value()), std::abs(only.value()), source);
}

}  // namespace

std::optional<double> input_voltage_of(const StepResult& step) {
  for (const PortResult& port : step.ports) {
    if (port.direction == "input" && port.counted && port.voltage.known) return std::abs(port.voltage.value);
  }
  return std::nullopt;
}

void add_loss_slopes(const std::vector<StepOutcome>& outcomes, const std::string& run, RunResult& result) {
  const efficiency::LossCurve curve{run, result.points, result.pieces};
  const double within_w = efficiency::kCommonLoadWithin * result.rated_power_w;
  for (std::size_t i = 0; i < result.around.size() && i < result.points.size(); ++i) {
    efficiency::Around& around = result.around[i];
    if (!around.input_voltage_v || !(*around.input_voltage_v > 0.0)) continue;
    auto slope = slope_of(outcomes, curve, i, *around.input_voltage_v, within_w);
    if (slope && efficiency::is_finite(*slope)) around.loss_per_volt = std::move(slope);
  }
}

}  // namespace loadstair::evaluation
