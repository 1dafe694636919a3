#include "daemon/evaluation/weighted_result.h"

#include <algorithm>
#include <cmath>
#include <optional>
#include <string>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/efficiency/weighted.h"
#include "daemon/evaluation/model_result.h"
#include "daemon/evaluation/quantity.h"

namespace loadstair::evaluation {
namespace {

/// Steps at input voltages nearer than this share are at one voltage.
constexpr double kSameVoltage = 0.01;
constexpr std::size_t kCecVoltages = 3;
constexpr double kPercent = 100.0;

struct Rated {
  double output_w = 0.0;
  double within = efficiency::kNominalWithin;  ///< of rated: how far a level may be moved
};

/// Rated DC power: rated output plus the loss there (EN 50530 takes the rated AC power over the conversion
/// efficiency where no rated DC power is given; from memory). Refused with no level near and no curve there.
estimate::Quoted rated_input(const Rated& rated, const efficiency::LossCurve& curve) {
  const efficiency::CurvePoint* nearest = nullptr;
  for (const efficiency::CurvePoint& point : curve.points) {
    const double off_w = std::abs(point.output_power.value() - rated.output_w);
    if (off_w > rated.within * rated.output_w) continue;
    if (nearest == nullptr || off_w < std::abs(nearest->output_power.value() - rated.output_w))
      nearest = &point;
  }
  if (nearest != nullptr) return estimate::ratio(estimate::Estimate{rated.output_w}, nearest->efficiency, "");
  const auto there = efficiency::loss_there(curve, rated.output_w);
  if (!there) return there.refusal();
  return rated.output_w + there->loss;
}

WeightedResult::Use to_result(const efficiency::WeightedUse& use) {
  WeightedResult::Use out{
      use.level.fraction, use.level.weight, use.from, to_quantity(use.efficiency, "1"), {}};
  if (use.moved) out.shift = to_quantity(use.shift, "1");
  return out;
}

WeightedResult to_result(const efficiency::Weighted& weighted) {
  WeightedResult out;
  out.title = weighted.title;
  out.efficiency = to_quantity(weighted.efficiency, "1");
  for (const efficiency::WeightedUse& use : weighted.uses) out.uses.push_back(to_result(use));
  return out;
}

void add(const efficiency::Weighted& weighted, RunResult& result) {
  result.weighted.push_back(to_result(weighted));
  result.weighted_sources.push_back(weighted);
}

std::string volts(double voltage_v) {
  return voltage_v > 0.0 ? base::print_number(voltage_v) + " V" : std::string{};
}

// ---- over three input voltages

struct VoltageLevels {
  double voltage_v = 0.0;
  std::vector<double> load_w;
};

double voltage_of(const setup::Step& step, const setup::Stair& stair) {
  return step.input_voltage_v.value_or(stair.ratings.input_voltage_v);
}

bool same_voltage(double a, double b) {
  return std::abs(a - b) <= kSameVoltage * std::max(std::abs(a), std::abs(b));
}

bool has_cec_levels(const VoltageLevels& levels, const Rated& rated) {
  const auto wanted = efficiency::levels(efficiency::Scheme::cec);
  return std::all_of(wanted.begin(), wanted.end(), [&](const efficiency::WeightedLevel& level) {
    return std::any_of(levels.load_w.begin(), levels.load_w.end(), [&](double load_w) {
      return std::abs(load_w - level.fraction * rated.output_w) <= rated.within * rated.output_w;
    });
  });
}

/// The input voltages at which the stair asks for all CEC levels, in its order.
std::vector<double> cec_voltages(const setup::Stair& stair, const Rated& rated) {
  std::vector<VoltageLevels> found;
  for (const setup::Step& step : stair.steps) {
    if (step.kind != setup::StepKind::level) continue;
    const double voltage_v = voltage_of(step, stair);
    auto at = std::find_if(found.begin(), found.end(), [voltage_v](const VoltageLevels& one) {
      return same_voltage(one.voltage_v, voltage_v);
    });
    if (at == found.end()) at = found.insert(found.end(), VoltageLevels{voltage_v, {}});
    at->load_w.push_back(step.load_w);
  }
  std::vector<double> out;
  for (const VoltageLevels& one : found) {
    if (one.voltage_v > 0.0 && has_cec_levels(one, rated)) out.push_back(one.voltage_v);
  }
  return out;
}

/// One voltage's figure, from the levels that the stair has there.
efficiency::Weighted cec_at(double voltage_v, const setup::Stair& stair, const Rated& rated,
                            const std::vector<StepOutcome>& outcomes, const std::string& run) {
  std::vector<efficiency::StepResult> steps;
  for (const StepOutcome& outcome : outcomes) {
    if (outcome.kind != setup::StepKind::level || outcome.plan == nullptr) continue;
    const Quantity& efficiency = outcome.result.efficiency;
    if (!efficiency.known || !efficiency.uncertainty_known) continue;
    if (same_voltage(voltage_of(*outcome.plan, stair), voltage_v)) steps.push_back(outcome.powers);
  }
  std::vector<efficiency::CurvePoint> points = efficiency::curve(steps);
  efficiency::split_by_range(points);
  const auto pieces = efficiency::fit_loss_models(points, floor_of(points));
  return efficiency::weighted_efficiency(efficiency::Scheme::cec, rated.output_w,
                                         efficiency::LossCurve{run, points, pieces}, volts(voltage_v),
                                         rated.within);
}

void add_cec_over_voltages(const std::vector<efficiency::Weighted>& by_voltage, RunResult& result) {
  efficiency::Weighted mean = efficiency::cec_over_voltages(by_voltage);
  WeightedResult printed = to_result(mean);
  printed.uses.clear();
  for (const efficiency::Weighted& one : by_voltage) {
    const std::string at = one.title.substr(std::min(one.title.size(), one.title.rfind(" at ")));
    for (const efficiency::WeightedUse& use : one.uses) {
      WeightedResult::Use line = to_result(use);
      line.weight /= static_cast<double>(by_voltage.size());
      line.from += at;
      printed.uses.push_back(std::move(line));
    }
  }
  result.weighted.push_back(std::move(printed));
  result.weighted_sources.push_back(std::move(mean));
}

void add_cec(const setup::Stair& stair, const Rated& rated, const std::vector<StepOutcome>& outcomes,
             const efficiency::LossCurve& curve, RunResult& result) {
  const std::vector<double> voltages = cec_voltages(stair, rated);
  if (voltages.size() == kCecVoltages) {
    std::vector<efficiency::Weighted> by_voltage;
    for (const double voltage_v : voltages)
      by_voltage.push_back(cec_at(voltage_v, stair, rated, outcomes, std::string{curve.run}));
    return add_cec_over_voltages(by_voltage, result);
  }
  add(efficiency::weighted_efficiency(efficiency::Scheme::cec, rated.output_w, curve,
                                      volts(stair.ratings.input_voltage_v), rated.within),
      result);
}

}  // namespace

void add_weighted(const setup::Hookup& hookup, const setup::Stair& stair,
                  const std::vector<StepOutcome>& outcomes, const std::string& run, RunResult& result) {
  const std::vector<std::string> titles = {"European efficiency", "CEC-weighted efficiency"};
  const auto refuse = [&](const std::string& why) {
    for (const std::string& title : titles) result.weighted.push_back({title, missing("1", why), {}});
  };
  const bool inverter = std::any_of(hookup.ports.begin(), hookup.ports.end(), [](const setup::Port& port) {
    return port.direction == setup::Direction::output && port.kind == setup::PortKind::ac;
  });
  if (!inverter)
    return refuse("weighted efficiencies are defined for inverters: this bench has no AC output");
  const Rated rated{stair.ratings.output_power_w, stair.load_tolerance_percent / kPercent};
  if (!(rated.output_w > 0.0)) return refuse("the stair file gives no rated output power");
  const bool none = std::none_of(outcomes.begin(), outcomes.end(),
                                 [](const StepOutcome& outcome) { return outcome.powers.efficiency.ok(); });
  if (none) return refuse("no step has an efficiency");
  const efficiency::LossCurve curve{run, result.points, result.pieces};
  if (const auto rated_dc = rated_input(rated, curve); rated_dc && rated_dc->value() > 0.0) {
    add(efficiency::weighted_efficiency(efficiency::Scheme::european, rated_dc->value(), curve, {},
                                        rated.within),
        result);
  } else {
    result.weighted.push_back(
        {titles[0],
         missing("1", "the rated power was not measured, so the rated DC power is not known"),
         {}});
  }
  add_cec(stair, rated, outcomes, curve, result);
}

}  // namespace loadstair::evaluation
