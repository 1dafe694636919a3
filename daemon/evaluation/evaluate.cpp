#include "daemon/evaluation/evaluate.h"

#include <algorithm>
#include <cmath>
#include <map>
#include <optional>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/efficiency/curve.h"
#include "daemon/evaluation/bench_checks.h"
#include "daemon/evaluation/decisions.h"
#include "daemon/evaluation/model_result.h"
#include "daemon/evaluation/quantity.h"
#include "daemon/evaluation/run_figures.h"
#include "daemon/evaluation/step_result.h"
#include "daemon/evaluation/weighted_result.h"

namespace loadstair::evaluation {
namespace {

/// A step at another input voltage than the rated one belongs to another curve.
constexpr double kSameVoltage = 0.01;
/// For the interval of a peak: its ends are good to about 0.5 % of its width, and 2 % where thousands of runs
/// are evaluated.
constexpr std::size_t kPeakDraws = 100'000;
constexpr std::size_t kFewDraws = 5'000;

/// Labels, with their number where one stands twice: sources of two steps must not share a key.
std::vector<std::string> unique_names(const std::vector<store::StoredStep>& steps) {
  std::map<std::string, int> counts;
  for (const store::StoredStep& step : steps) ++counts[step.label];
  std::vector<std::string> names;
  for (const store::StoredStep& step : steps) {
    const bool twice = counts[step.label] > 1 || step.label.empty();
    names.push_back(twice ? step.label + " (step " + base::print_integer(step.index + 1) + ")" : step.label);
  }
  return names;
}

bool at_rated_voltage(const setup::Step* plan, const setup::Stair& stair) {
  if (plan == nullptr || !plan->input_voltage_v) return true;
  const double rated = stair.ratings.input_voltage_v;
  return std::abs(*plan->input_voltage_v - rated) <= kSameVoltage * rated;
}

/// The run in keys: as its windows have it; empty when nothing was measured.
std::string run_name_of(const Windows& windows) {
  for (const auto& window : windows) {
    if (window) return window->run;
  }
  return {};
}

/// Levels make the curve, each once: a closure's second visit is held against the first.
bool on_curve(const StepOutcome& outcome, const setup::Stair& stair) {
  const Quantity& efficiency = outcome.result.efficiency;
  return outcome.kind == setup::StepKind::level && efficiency.known && efficiency.uncertainty_known &&
         at_rated_voltage(outcome.plan, stair);
}

/// For comparisons: what was around the curve's points, and which meters these were.
void add_circumstances(const setup::Hookup& hookup, const setup::Stair& stair, const Windows& windows,
                       const std::vector<std::string>& names, RunResult& result) {
  result.rated_power_w = std::max(0.0, stair.ratings.output_power_w);
  for (const efficiency::CurvePoint& point : result.points) {
    efficiency::Around& around = result.around.emplace_back();
    const auto step =
        static_cast<std::size_t>(std::find(names.begin(), names.end(), point.label) - names.begin());
    if (step >= names.size()) continue;
    if (windows[step]) around.ambient_c = windows[step]->ambient_c;
    for (const PortResult& port : result.steps[step].ports) {
      if (around.input_voltage_v || port.direction != "input" || !port.counted || !port.voltage.known)
        continue;
      around.input_voltage_v = std::abs(port.voltage.value);
    }
  }
  for (const setup::Instrument& meter : hookup.instruments)
    result.meters.push_back({meter.name, meter.profile_name, meter.serial_number, meter.calibrated});
}

void add_remarks(const store::StoredRun& run, const setup::Hookup& hookup, const setup::Stair& stair,
                 RunResult& result) {
  if (!run.amendments.empty() && hookup.text == run.hookup_text && stair.text == run.stair_text) {
    result.remarks.push_back(base::print_integer(static_cast<std::int64_t>(run.amendments.size())) +
                             " amendments of this run are not applied to these results");
  }
  if (run.summary.state == store::RunState::interrupted) {
    result.remarks.push_back("the run was interrupted: steps after the interruption are missing");
  }
  if (!run.end_reason.empty() && run.summary.state != store::RunState::done) {
    result.remarks.push_back("the run ended because: " + run.end_reason);
  }
  if (run.steps.size() != stair.steps.size()) {
    result.remarks.push_back(
        "the record has " + base::print_integer(static_cast<std::int64_t>(run.steps.size())) +
        " steps, its stair file " + base::print_integer(static_cast<std::int64_t>(stair.steps.size())));
  }
  if (!run.method_version.empty() && run.method_version != kMethodVersion) {
    result.remarks.push_back("recorded with method version " + run.method_version + ", evaluated with " +
                             std::string{kMethodVersion});
  }
}

}  // namespace

RunResult evaluate(const store::StoredRun& run, const setup::Hookup& hookup, const setup::Stair& stair,
                   Validate validating) {
  RunResult result;
  result.run = run.summary.run;
  result.prototype = run.summary.prototype;
  result.revision = run.summary.revision;
  result.unit = run.summary.unit;
  result.state = store::name_of(run.summary.state);
  result.method_version = kMethodVersion;
  std::vector<Track> tracks = tracks_of(run, hookup);
  const std::vector<std::string> names = unique_names(run.steps);
  Windows windows;
  for (std::size_t i = 0; i < run.steps.size(); ++i)
    windows.push_back(window_of(run, hookup, stair, tracks, run.steps[i], names[i]));
  const BenchChecks checks = bench_checks(run, hookup, stair, windows, tracks);
  result.bench_checks = checks.results;
  std::vector<StepOutcome> outcomes;
  std::vector<efficiency::StepResult> of_curve;
  for (std::size_t i = 0; i < run.steps.size(); ++i) {
    if (windows[i]) windows[i]->checks = &checks;
    outcomes.push_back(
        step_outcome(run, hookup, stair, tracks, run.steps[i], windows[i], validating == Validate::yes));
    const StepOutcome& outcome = outcomes.back();
    result.steps.push_back(outcome.result);
    if (on_curve(outcome, stair)) of_curve.push_back(outcome.powers);
  }
  result.points = efficiency::curve(of_curve);
  for (const efficiency::CurvePoint& point : result.points) {
    const auto step =
        static_cast<std::size_t>(std::find(names.begin(), names.end(), point.label) - names.begin());
    // One figure, one interval: where Monte Carlo took the linear one's place, it stands here too.
    const bool found = step < names.size();
    result.curve.push_back({point.label, to_quantity(point.output_power, "W"),
                            found ? result.steps[step].efficiency : to_quantity(point.efficiency, "1"),
                            to_quantity(point.loss, "W")});
  }
  add_circumstances(hookup, stair, windows, names, result);
  add_models(result, validating == Validate::yes ? kPeakDraws : kFewDraws);
  add_weighted(hookup, stair, outcomes, run_name_of(windows), result);
  run_figures(result, outcomes, run, hookup, stair);
  decide_limits(result, outcomes, stair);
  add_remarks(run, hookup, stair, result);
  return result;
}

}  // namespace loadstair::evaluation
