#include "daemon/evaluation/model_result.h"

#include <algorithm>
#include <cmath>
#include <cstdint>
#include <string>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/efficiency/peak.h"
#include "daemon/evaluation/quantity.h"

namespace loadstair::evaluation {
namespace {

/// Where no resolution is known, no level is weighted as if its loss were known better than this share of its
/// power.
constexpr double kLeastShare = 1e-6;

Quantity to_quantity(const estimate::Coverage& interval, std::string unit) {
  Quantity quantity;
  quantity.known = true;
  quantity.value = interval.value;
  quantity.unit = std::move(unit);
  quantity.low = interval.low;
  quantity.high = interval.high;
  quantity.level = interval.level;
  quantity.method = "monte-carlo";
  return quantity;
}

/// Everything is refused for one reason.
void refuse(ModelResult& out, const std::string& why) {
  out.p0 = missing("W", why);
  out.p1 = missing("1", why);
  out.p2 = missing("1/W", why);
  out.peak_power = missing("W", why);
  out.peak_efficiency = missing("1", why);
}

ModelResult to_result(const efficiency::LossPiece& piece, std::size_t draws) {
  ModelResult out;
  out.span = piece.segment.empty() ? "all levels" : piece.segment;
  if (!piece.model) {
    out.lack_of_fit =
        "not fitted (" + base::print_integer(static_cast<std::int64_t>(piece.levels)) + " levels)";
    refuse(out, piece.why);
    return out;
  }
  const efficiency::LossModel& model = *piece.model;
  out.chi_squared = model.chi_squared;
  out.degrees_of_freedom = model.degrees_of_freedom;
  out.lack_of_fit = model.lack_of_fit_text;
  out.used = piece.usable() != nullptr;
  if (!out.used) {
    refuse(out, "the loss is no parabola here: lack of fit " + model.lack_of_fit_text);
    return out;
  }
  out.p0 = evaluation::to_quantity(model.p0, "W");
  out.p1 = evaluation::to_quantity(model.p1, "1");
  out.p2 = evaluation::to_quantity(model.p2, "1/W");
  if (const auto peak = efficiency::peak_of(model, draws)) {
    out.peak_power = to_quantity(peak->power_interval, "W");
    out.peak_efficiency = to_quantity(peak->efficiency_interval, "1");
  } else {
    out.peak_power = missing("W", peak.refusal().reason);
    out.peak_efficiency = missing("1", peak.refusal().reason);
  }
  return out;
}

}  // namespace

double floor_of(const std::vector<efficiency::CurvePoint>& points) {
  double floor_w = 0.0;
  double largest_w = 0.0;
  for (const efficiency::CurvePoint& point : points) {
    double variance = 0.0;
    for (const estimate::Term& term : point.loss.terms()) {
      if (term.source->resolution) variance += term.contribution * term.contribution;
    }
    floor_w = std::max(floor_w, std::sqrt(variance));
    largest_w = std::max(largest_w, std::abs(point.input_power.value()));
  }
  return std::max(floor_w, kLeastShare * largest_w);
}

void add_models(RunResult& result, std::size_t draws) {
  efficiency::split_by_range(result.points);
  result.pieces = efficiency::fit_loss_models(result.points, floor_of(result.points));
  for (const efficiency::LossPiece& piece : result.pieces) result.models.push_back(to_result(piece, draws));
}

}  // namespace loadstair::evaluation
