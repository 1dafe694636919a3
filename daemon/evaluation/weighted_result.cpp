#include "daemon/evaluation/weighted_result.h"

#include <algorithm>
#include <cmath>
#include <optional>
#include <string>
#include <utility>
#include <vector>

#include "analysis/base/number.h"
#include "analysis/efficiency/weighted.h"
#include "daemon/evaluation/quantity.h"

namespace loadstair::evaluation {
namespace {

/// Rated DC power: rated output plus the loss there (EN 50530 takes the rated AC power over the conversion
/// efficiency where no rated DC power is given; from memory). Nullopt: no level near and no model.
std::optional<double> rated_input(double rated_w, const std::vector<efficiency::CurvePoint>& points,
                                  const efficiency::LossModel* model) {
  for (const efficiency::CurvePoint& point : points) {
    if (std::abs(point.output_power.value() - rated_w) <= efficiency::kNominalWithin * rated_w) {
      return rated_w / point.efficiency.value();
    }
  }
  if (model == nullptr || model->lack_of_fit || rated_w < model->least_w || rated_w > model->greatest_w) {
    return std::nullopt;
  }
  return rated_w / model->efficiency_at(rated_w).value();
}

WeightedResult to_result(const efficiency::Weighted& weighted) {
  WeightedResult out;
  out.title = weighted.title;
  out.efficiency = to_quantity(weighted.efficiency, "1");
  for (const efficiency::WeightedUse& use : weighted.uses) {
    out.uses.push_back({use.level.fraction, use.level.weight, use.from, to_quantity(use.efficiency, "1")});
  }
  return out;
}

}  // namespace

void add_weighted(const setup::Hookup& hookup, const setup::Stair& stair, RunResult& result) {
  const std::vector<std::string> titles = {"European efficiency", "CEC-weighted efficiency"};
  const auto& points = result.points;
  const auto refuse = [&](const std::string& why) {
    for (const std::string& title : titles) result.weighted.push_back({title, missing("1", why), {}});
  };
  const bool inverter = std::any_of(hookup.ports.begin(), hookup.ports.end(), [](const setup::Port& port) {
    return port.direction == setup::Direction::output && port.kind == setup::PortKind::ac;
  });
  if (!inverter)
    return refuse("weighted efficiencies are defined for inverters: this bench has no AC output");
  const double rated_w = stair.ratings.output_power_w;
  if (!(rated_w > 0.0)) return refuse("the stair file gives no rated output power");
  if (points.empty()) return refuse("no step has an efficiency");
  const efficiency::LossModel* fitted = result.model_source ? &*result.model_source : nullptr;
  const auto add = [&](efficiency::Weighted weighted) {
    result.weighted.push_back(to_result(weighted));
    result.weighted_sources.push_back(std::move(weighted));
  };
  if (const auto rated_dc_w = rated_input(rated_w, points, fitted)) {
    add(efficiency::weighted_efficiency(efficiency::Scheme::european, *rated_dc_w, points, fitted));
  } else {
    result.weighted.push_back(
        {titles[0],
         missing("1", "the rated power was not measured, so the rated DC power is not known"),
         {}});
  }
  const std::string voltage = stair.ratings.input_voltage_v > 0.0
                                  ? base::print_number(stair.ratings.input_voltage_v) + " V"
                                  : std::string{};
  add(efficiency::weighted_efficiency(efficiency::Scheme::cec, rated_w, points, fitted, voltage));
}

}  // namespace loadstair::evaluation
