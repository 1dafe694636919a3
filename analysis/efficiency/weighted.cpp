#include "analysis/efficiency/weighted.h"

#include <array>
#include <cmath>
#include <optional>
#include <utility>

#include "analysis/base/number.h"

namespace loadstair::efficiency {

namespace {

constexpr std::array<WeightedLevel, 6> kEuropean{
    {{0.05, 0.03}, {0.10, 0.06}, {0.20, 0.13}, {0.30, 0.10}, {0.50, 0.48}, {1.00, 0.20}}};
constexpr std::array<WeightedLevel, 6> kCec{
    {{0.10, 0.04}, {0.20, 0.05}, {0.30, 0.12}, {0.50, 0.21}, {0.75, 0.53}, {1.00, 0.05}}};

/// Output power at which the model's input power is that; Newton on P + loss(P), which rises smoothly.
std::optional<double> output_for_input(const LossModel& model, double input_w) {
  double p = input_w;
  for (int i = 0; i < 50; ++i) {
    const double slope = 1 + model.slope_at(p).value();
    if (!(slope > 0)) return std::nullopt;
    const double step = (p + model.loss_at(p).value() - input_w) / slope;
    p -= step;
    if (std::abs(step) <= 1e-12 * input_w) return p;
  }
  return std::nullopt;
}

double basis_w(Scheme scheme, const CurvePoint& point) {
  return scheme == Scheme::european ? point.input_power.value() : point.output_power.value();
}

/// d loss / d P_out near a level: from the model, else between its neighbours (no model, or one that does not
/// fit).
std::optional<Estimate> loss_slope(std::span<const CurvePoint> points, std::size_t at,
                                   const LossModel* model) {
  if (model != nullptr) return model->slope_at(points[at].output_power.value());
  const std::size_t low = at == 0 ? 0 : at - 1;
  const std::size_t high = at + 1 < points.size() ? at + 1 : at;
  const Estimate run = points[high].output_power - points[low].output_power;
  if (!(run.value() > 0)) return std::nullopt;
  return (points[high].loss - points[low].loss) / run;
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

base::Outcome<WeightedUse> from_model(Scheme scheme, const WeightedLevel& level, double nominal_w,
                                      const LossModel* model, const std::string& place) {
  if (model == nullptr)
    return base::Refusal{place, "no measured level within 2 % of rated, and no loss model"};
  const auto output_w =
      scheme == Scheme::european ? output_for_input(*model, nominal_w) : std::optional<double>{nominal_w};
  if (!output_w || *output_w < model->least_w || *output_w > model->greatest_w) {
    return base::Refusal{place,
                         "no measured level within 2 % of rated, and it lies outside the measured span"};
  }
  WeightedUse use{level, "loss model", {}, {}, false};
  if (scheme == Scheme::cec) {
    use.efficiency = model->efficiency_at(*output_w);
    return use;
  }
  // At fixed input N: d P_out = -d loss / (1 + loss'), eta = P_out / N.
  const double slope = model->slope_at(*output_w).value();
  const Estimate loss = model->loss_at(*output_w);
  use.efficiency = estimate::combine(*output_w / nominal_w, {{loss, -1 / ((1 + slope) * nominal_w)}});
  return use;
}

base::Outcome<WeightedUse> use_of(Scheme scheme, const WeightedLevel& level, double rated_w,
                                  std::span<const CurvePoint> points, const LossModel* model) {
  const std::string place = "level " + percent(level.fraction);
  const double nominal_w = level.fraction * rated_w;
  if (points.empty()) return base::Refusal{place, "no level was measured"};
  const std::size_t at = nearest(scheme, points, nominal_w);
  const CurvePoint& point = points[at];
  const double off = std::abs(basis_w(scheme, point) - nominal_w) / rated_w;
  if (off > kNominalWithin) return from_model(scheme, level, nominal_w, model, place);
  WeightedUse use{level, point.label, point.efficiency, Estimate{}, false};
  if (off <= kNominalEqual) return use;
  const auto slope = loss_slope(points, at, model);
  if (!slope) {
    return base::Refusal{place, "measured at " + percent(basis_w(scheme, point) / rated_w) +
                                    " of rated, and a single level has no slope to move it by"};
  }
  use.moved = true;
  use.shift = shift_of(scheme, nominal_w, point, *slope);
  use.efficiency = point.efficiency + use.shift;
  return use;
}

}  // namespace

std::span<const WeightedLevel> levels(Scheme scheme) {
  return scheme == Scheme::european ? std::span<const WeightedLevel>{kEuropean}
                                    : std::span<const WeightedLevel>{kCec};
}

Weighted weighted_efficiency(Scheme scheme, double rated_w, std::span<const CurvePoint> points,
                             const LossModel* model, std::string_view voltage) {
  Weighted out;
  out.title = scheme == Scheme::european ? "European efficiency" : "CEC-weighted";
  if (!voltage.empty()) out.title += " at " + std::string{voltage};
  if (!(rated_w > 0) || !std::isfinite(rated_w)) {
    out.efficiency = base::Refusal{out.title, "the rated power is not declared or not above zero"};
    return out;
  }
  const LossModel* usable = model != nullptr && !model->lack_of_fit ? model : nullptr;
  std::vector<std::string> refused;
  Estimate sum;
  for (const WeightedLevel& level : levels(scheme)) {
    auto use = use_of(scheme, level, rated_w, points, usable);
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
  out.efficiency = sum / 3.0;
  return out;
}

}  // namespace loadstair::efficiency
