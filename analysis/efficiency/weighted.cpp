#include "analysis/efficiency/weighted.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <utility>

#include "analysis/base/number.h"

namespace loadstair::efficiency {

namespace {

constexpr std::array<WeightedLevel, 6> kEuropean{
    {{0.05, 0.03}, {0.10, 0.06}, {0.20, 0.13}, {0.30, 0.10}, {0.50, 0.48}, {1.00, 0.20}}};
constexpr std::array<WeightedLevel, 6> kCec{
    {{0.10, 0.04}, {0.20, 0.05}, {0.30, 0.12}, {0.50, 0.21}, {0.75, 0.53}, {1.00, 0.05}}};

double basis_w(Scheme scheme, const CurvePoint& point) {
  return scheme == Scheme::european ? point.input_power.value() : point.output_power.value();
}

/// Nominal minus measured efficiency of a level moved along its loss slope, sources kept.
Estimate shift_of(Scheme scheme, double nominal_w, const CurvePoint& point, const Estimate& slope) {
  if (scheme == Scheme::european) {
    const Estimate by_input = slope / (1.0 + slope);
    const Estimate loss = point.loss + by_input * (nominal_w - point.input_power);
    return point.loss / point.input_power - loss / nominal_w;
  }
  const Estimate loss = point.loss + slope * (nominal_w - point.output_power);
  return nominal_w / (nominal_w + loss) - point.output_power / (point.output_power + point.loss);
}

std::string percent(double fraction) {
  return base::print_significant(100 * fraction, 3) + " %";
}

std::size_t nearest(Scheme scheme, std::span<const CurvePoint> points, double nominal_w) {
  std::size_t out = 0;
  for (std::size_t i = 1; i < points.size(); ++i) {
    const double here = std::abs(basis_w(scheme, points[i]) - nominal_w);
    if (here < std::abs(basis_w(scheme, points[out]) - nominal_w)) out = i;
  }
  return out;
}

/// A level that was not measured, from the curve.
base::Outcome<WeightedUse> from_curve(Scheme scheme, const WeightedLevel& level, double nominal_w,
                                      const LossCurve& curve, const std::string& place, double within) {
  const bool european = scheme == Scheme::european;
  const auto there = loss_there(curve, nominal_w, european ? Basis::input_power : Basis::output_power);
  if (!there) {
    return base::Refusal{place, "no measured level within " +
                                    base::print_number(std::round(1e4 * within) / 1e2) + " % of rated, and " +
                                    there.refusal().reason};
  }
  WeightedUse use{level, there->by_model ? "loss model" : "between its neighbours", {}, {}, false};
  const double output_w = there->output_power_w;
  if (!(output_w + there->loss.value() > 0) || !(1 + there->slope > 0))
    return base::Refusal{place, "the curve has no input power there"};
  if (!european) {
    use.efficiency = output_w / (output_w + there->loss);
    return use;
  }
  // At fixed input N: d P_out = -d loss / (1 + loss'), eta = P_out / N.
  use.efficiency =
      estimate::combine(output_w / nominal_w, {{there->loss, -1 / ((1 + there->slope) * nominal_w)}});
  return use;
}

base::Outcome<WeightedUse> use_of(Scheme scheme, const WeightedLevel& level, double rated_w,
                                  const LossCurve& curve, double within) {
  const std::string place = "level " + percent(level.fraction);
  const double nominal_w = level.fraction * rated_w;
  if (curve.points.empty()) return base::Refusal{place, "no level was measured"};
  const std::size_t at = nearest(scheme, curve.points, nominal_w);
  const CurvePoint& point = curve.points[at];
  if (!is_finite(point)) return base::Refusal{place, "a number of " + point.label + " is not finite"};
  const double off = std::abs(basis_w(scheme, point) - nominal_w) / rated_w;
  if (!(off <= std::max(within, kNominalEqual)))
    return from_curve(scheme, level, nominal_w, curve, place, within);
  WeightedUse use{level, point.label, point.efficiency, Estimate{}, false};
  if (off <= kNominalEqual) return use;
  if (!(point.output_power.value() > 0) || !(point.input_power.value() > 0) ||
      !(point.output_power.value() + point.loss.value() > 0)) {
    return base::Refusal{place, "the level measured there has no output or no input power"};
  }
  const Estimate slope = slope_near(curve, at);
  if (!is_finite(slope) || !(1 + slope.value() > 0))
    return base::Refusal{place, "the loss has no slope there to move the level by"};
  use.moved = true;
  use.shift = shift_of(scheme, nominal_w, point, slope);
  if (!is_finite(use.shift)) return base::Refusal{place, "the level cannot be moved there"};
  use.efficiency = point.efficiency + use.shift;
  return use;
}

}  // namespace

std::span<const WeightedLevel> levels(Scheme scheme) {
  return scheme == Scheme::european ? std::span<const WeightedLevel>{kEuropean}
                                    : std::span<const WeightedLevel>{kCec};
}

Weighted weighted_efficiency(Scheme scheme, double rated_w, const LossCurve& curve, std::string_view voltage,
                             double within) {
  Weighted out;
  out.title = scheme == Scheme::european ? "European efficiency" : "CEC-weighted";
  if (!voltage.empty()) out.title += " at " + std::string{voltage};
  if (!(rated_w > 0) || !std::isfinite(rated_w)) {
    out.efficiency = base::Refusal{out.title, "the rated power is not declared or not above zero"};
    return out;
  }
  std::vector<std::string> refused;
  Estimate sum;
  for (const WeightedLevel& level : levels(scheme)) {
    auto use = use_of(scheme, level, rated_w, curve, within);
    if (!use) {
      refused.push_back(use.refusal().text());
      continue;
    }
    sum = sum + level.weight * use->efficiency;
    out.uses.push_back(*std::move(use));
  }
  if (refused.empty()) {
    out.efficiency = sum;
    return out;
  }
  std::string reason;
  for (const std::string& one : refused) reason += (reason.empty() ? "" : "; ") + one;
  out.efficiency = base::Refusal{out.title, reason};
  return out;
}

Weighted weighted_efficiency(Scheme scheme, double rated_w, std::span<const CurvePoint> points,
                             const LossModel* model, std::string_view voltage) {
  std::vector<CurvePoint> whole{points.begin(), points.end()};
  for (CurvePoint& point : whole) point.segment.clear();
  std::vector<LossPiece> pieces;
  if (model != nullptr) pieces.push_back({"", points.size(), *model, ""});
  return weighted_efficiency(scheme, rated_w, LossCurve{"", whole, pieces}, voltage);
}

Weighted cec_over_voltages(std::span<const Weighted> by_voltage) {
  Weighted out;
  out.title = "CEC efficiency";
  if (by_voltage.size() != 3) {
    out.efficiency =
        base::Refusal{out.title, "it is the mean over three DC voltages, got " +
                                     base::print_integer(static_cast<std::int64_t>(by_voltage.size()))};
    return out;
  }
  Estimate sum;
  for (const Weighted& one : by_voltage) {
    if (!one.efficiency) {
      out.efficiency = one.efficiency.refusal();
      return out;
    }
    sum = sum + *one.efficiency;
  }
  if (!is_finite(sum)) {
    out.efficiency = base::Refusal{out.title, "a figure is not finite"};
    return out;
  }
  out.efficiency = sum / 3.0;
  return out;
}

}  // namespace loadstair::efficiency
