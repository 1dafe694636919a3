#include "analysis/efficiency/loss_pieces.h"

#include <algorithm>
#include <cmath>
#include <set>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/estimate/sharing.h"

namespace loadstair::efficiency {

namespace {

double basis_w(const CurvePoint& point, Basis basis) {
  return basis == Basis::output_power ? point.output_power.value() : point.input_power.value();
}

std::string watts(double value) {
  return base::print_significant(value, 4) + " W";
}

/// Index of the first of the two neighbouring levels that enclose a power; a level's own power belongs to a
/// neighbour of its own piece, if there is one.
base::Outcome<std::size_t> enclosing(const LossCurve& curve, double power_w, Basis basis) {
  const std::string place = watts(power_w);
  std::optional<std::size_t> between_pieces;
  for (std::size_t i = 0; i + 1 < curve.points.size(); ++i) {
    const CurvePoint& low = curve.points[i];
    const CurvePoint& high = curve.points[i + 1];
    if (!(basis_w(low, basis) <= power_w && power_w <= basis_w(high, basis))) continue;
    if (low.segment == high.segment) return i;
    between_pieces = i;
  }
  if (!between_pieces) return base::Refusal{place, "it lies outside the measured span"};
  const auto called = [&](std::size_t i) {
    const std::string& name = curve.points[i].segment;
    return name.empty() ? std::string{"unnamed"} : "\"" + name + "\"";
  };
  return base::Refusal{place, "it lies between two pieces of the curve, " + called(*between_pieces) +
                                  " and " + called(*between_pieces + 1)};
}

/// The level next to `at`, down or up, where it is on the same piece and at another power.
std::optional<std::size_t> next_to(const LossCurve& curve, std::size_t at, bool up) {
  if (up ? at + 1 >= curve.points.size() : at == 0) return std::nullopt;
  const std::size_t next = up ? at + 1 : at - 1;
  const double apart = curve.points[next].output_power.value() - curve.points[at].output_power.value();
  if (curve.points[next].segment != curve.points[at].segment || !((up ? apart : -apart) > 0))
    return std::nullopt;
  return next;
}

Estimate chord(const CurvePoint& low, const CurvePoint& high) {
  return (high.loss - low.loss) / (high.output_power - low.output_power);
}

/// What a loss may do between two levels besides following the line between them.
struct Bend {
  Estimate curvature;  ///< second divided difference that is taken off, W/W^2
  double lowest_w = 0, highest_w = 0;
};

/// Of the two levels and the next one, lower or higher; `apart_w` from the outer level to the far one of the
/// two.
struct Triple {
  Estimate curvature;
  double apart_w = 0;
};

std::optional<Triple> triple(const LossCurve& curve, std::size_t low, bool up) {
  const auto next = next_to(curve, up ? low + 1 : low, up);
  if (!next) return std::nullopt;
  const auto& points = curve.points;
  const CurvePoint& first = up ? points[low] : points[*next];
  const CurvePoint& middle = up ? points[low + 1] : points[low];
  const CurvePoint& last = up ? points[*next] : points[low + 1];
  const Estimate apart = last.output_power - first.output_power;
  return Triple{(chord(middle, last) - chord(first, middle)) / apart, apart.value()};
}

/// Somewhere between two levels the loss jumps by step_w; seen from the line between them at `share` of the
/// way, it is still below the jump or already above it.
Bend stepping(const Estimate& curvature, double step_w, double share, double more_w) {
  const auto [lowest, highest] = std::minmax({-share * step_w, (1 - share) * step_w});
  return {curvature, lowest - more_w, highest + more_w};
}

/// What the loss may do at power_w between levels `low` and `low` + 1.
Bend bend_between(const LossCurve& curve, std::size_t low, double power_w) {
  const double from_w = curve.points[low].output_power.value();
  const double to_w = curve.points[low + 1].output_power.value();
  const double h = to_w - from_w;
  const double share = (power_w - from_w) / h;
  const double reach = (power_w - from_w) * (to_w - power_w);
  const auto below = triple(curve, low, false);
  const auto above = triple(curve, low, true);
  if (below && above) {
    const Estimate mean = 0.5 * (below->curvature + above->curvature);
    const double unlike = below->curvature.value() - above->curvature.value();
    const double step_w = unlike * h / (1 / below->apart_w + 1 / above->apart_w);
    const double bent = (std::abs(below->curvature.value()) + std::abs(above->curvature.value())) / 2;
    return stepping(mean, step_w, share, bent * reach);
  }
  // A step that explains the whole of d; less than it is what a curvature of d does, so it is in there.
  if (below) return stepping(Estimate{0}, below->curvature.value() * h * below->apart_w, share, 0);
  if (above) return stepping(Estimate{0}, -above->curvature.value() * h * above->apart_w, share, 0);
  // Between none and the most that the family without negative terms can bend.
  const double sum_w = from_w + to_w;
  const double most = sum_w > 0 ? chord(curve.points[low], curve.points[low + 1]).value() / sum_w * reach : 0;
  return {Estimate{0}, std::min(-most, 0.0), std::max(-most, 0.0)};
}

/// Between levels `low` and `low` + 1, which lie at different powers of one piece.
LossThere interpolated(const LossCurve& curve, std::size_t low, double power_w) {
  const CurvePoint& first = curve.points[low];
  const CurvePoint& second = curve.points[low + 1];
  const Estimate slope = chord(first, second);
  const Bend bend = bend_between(curve, low, power_w);
  const auto source = estimate::make_type_b(
      estimate::key::window(curve.run, first.label + " to " + second.label,
                            "interpolation at " + base::print_significant(power_w, 9)),
      "interpolation between " + first.label + " and " + second.label, estimate::Distribution::rectangular);
  LossThere out;
  out.output_power_w = power_w;
  out.by_model = false;
  out.slope = slope.value();
  out.loss = first.loss + slope * (power_w - first.output_power) -
             bend.curvature * ((power_w - first.output_power) * (second.output_power - power_w)) +
             estimate::bounded(bend.lowest_w, bend.highest_w, source);
  return out;
}

/// Powers of a size that no product of them is finite say nothing.
base::Outcome<LossThere> if_finite(LossThere there) {
  if (!is_finite(there.loss) || !std::isfinite(there.slope))
    return base::Refusal{watts(there.output_power_w), "the loss there is not a finite number"};
  return there;
}

/// Output power between two levels at which output plus loss is that; both grow, so bisection finds it.
template <class LossAt>
double output_for_input(double low_w, double high_w, double input_w, LossAt loss_at) {
  for (int i = 0; i < 200 && high_w - low_w > 1e-14 * high_w; ++i) {
    const double middle = (low_w + high_w) / 2;
    (middle + loss_at(middle) < input_w ? low_w : high_w) = middle;
  }
  return (low_w + high_w) / 2;
}

}  // namespace

void split_by_range(std::span<CurvePoint> points) {
  std::vector<std::set<std::string>> ranges;
  for (const CurvePoint& point : points) {
    std::set<std::string>& own = ranges.emplace_back();
    for (const Estimate* of : {&point.input_power, &point.output_power}) {
      for (const estimate::Term& term : of->terms()) {
        const estimate::Owner& owner = term.source->owner;
        if (!estimate::meter_part_of(*term.source).empty() && !owner.range.empty())
          own.insert(owner.instrument + " on " + owner.range);
      }
    }
  }
  const auto everywhere = [&](const std::string& range) {
    return std::all_of(ranges.begin(), ranges.end(), [&](const auto& own) { return own.count(range) > 0; });
  };
  for (std::size_t i = 0; i < points.size(); ++i) {
    for (const std::string& range : ranges[i]) {
      if (everywhere(range)) continue;
      points[i].segment += (points[i].segment.empty() ? "" : ", ") + range;
    }
  }
}

std::vector<LossPiece> fit_loss_models(std::span<const CurvePoint> points, double floor_w) {
  std::vector<LossPiece> out;
  for (const CurvePoint& point : points) {
    const auto known = std::any_of(out.begin(), out.end(),
                                   [&](const LossPiece& piece) { return piece.segment == point.segment; });
    if (known) continue;
    std::vector<CurvePoint> own;
    std::copy_if(points.begin(), points.end(), std::back_inserter(own),
                 [&](const CurvePoint& one) { return one.segment == point.segment; });
    LossPiece& piece = out.emplace_back();
    piece.segment = point.segment;
    piece.levels = own.size();
    if (auto model = fit_loss_model(own, floor_w)) {
      piece.model = *std::move(model);
    } else {
      piece.why = model.refusal().text();
    }
  }
  return out;
}

const LossPiece* piece_of(const LossCurve& curve, const CurvePoint& point) {
  for (const LossPiece& piece : curve.pieces) {
    if (piece.segment == point.segment) return &piece;
  }
  return nullptr;
}

base::Outcome<const LossPiece*> piece_around(const LossCurve& curve, double power_w, Basis basis) {
  if (curve.pieces.empty()) return base::Refusal{watts(power_w), "there is no loss model"};
  const auto low = enclosing(curve, power_w, basis);
  if (!low) return low.refusal();
  const LossPiece* piece = piece_of(curve, curve.points[*low]);
  if (piece == nullptr) return base::Refusal{watts(power_w), "there is no loss model"};
  return piece;
}

Estimate slope_near(const LossCurve& curve, std::size_t at) {
  const CurvePoint& point = curve.points[at];
  const LossPiece* piece = piece_of(curve, point);
  if (piece != nullptr && piece->usable() != nullptr)
    return piece->usable()->slope_at(point.output_power.value());
  // One source for all levels: a jump between two of them turns the chords at both the same way.
  const auto source =
      estimate::make_type_b(estimate::key::window(curve.run, "", "slope of the loss"),
                            "slope of the loss between levels", estimate::Distribution::rectangular);
  const auto below = next_to(curve, at, false);
  const auto above = next_to(curve, at, true);
  if (!below && !above)  // a level without power has no such bound: not finite
    return estimate::bounded(0, 2 * point.loss.value() / point.output_power.value(), source);
  if (below && above) {
    // The tangent of a curve that bends one way, or jumps on one side, lies between both chords.
    const Estimate first = chord(curve.points[*below], point);
    const Estimate second = chord(point, curve.points[*above]);
    const double half = std::abs(second.value() - first.value()) / 2;
    return 0.5 * (first + second) + estimate::bounded(-half, half, source);
  }
  // At an end the tangent of p0 + p1 P + p2 P^2 without negative terms is off the chord by no more than the
  // chord's own slope.
  const Estimate slope = chord(curve.points[below.value_or(at)], curve.points[above.value_or(at)]);
  return slope + estimate::bounded(-std::abs(slope.value()), std::abs(slope.value()), source);
}

base::Outcome<LossThere> loss_there(const LossCurve& curve, double power_w, Basis basis) {
  const bool finite = std::all_of(curve.points.begin(), curve.points.end(),
                                  [](const CurvePoint& point) { return is_finite(point); });
  if (!finite) return base::Refusal{"loss curve", "a number of a level is not finite"};
  const auto piece = piece_around(curve, power_w, basis);
  if (!piece) return piece.refusal();
  const std::size_t low = *enclosing(curve, power_w, basis);
  const double low_w = curve.points[low].output_power.value();
  const double high_w = curve.points[low + 1].output_power.value();
  if (!(low_w < high_w)) return base::Refusal{watts(power_w), "the levels around it are at one power"};
  const LossModel* model = (*piece)->usable();
  const auto there = [&](double output_w) {
    if (model == nullptr) return interpolated(curve, low, output_w);
    return LossThere{output_w, model->loss_at(output_w), model->slope_at(output_w).value(), true};
  };
  if (basis == Basis::output_power) return if_finite(there(power_w));
  // A model need not go through the levels: the output may lie a little beyond them.
  const double beyond_w = high_w - low_w;
  const double output_w =
      model == nullptr
          ? output_for_input(low_w, high_w, power_w, [&](double p) { return there(p).loss.value(); })
          : output_for_input(std::max(0.0, low_w - beyond_w), high_w + beyond_w, power_w,
                             [&](double p) { return there(p).loss.value(); });
  return if_finite(there(output_w));
}

}  // namespace loadstair::efficiency
