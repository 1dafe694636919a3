#include "daemon/evaluation/forecast.h"

#include <algorithm>
#include <cmath>
#include <map>
#include <utility>

#include "analysis/base/number.h"
#include "daemon/evaluation/evaluate.h"
#include "daemon/evaluation/ideal_run.h"

namespace loadstair::evaluation {
namespace {

/// Corrections for burden and leads that move a power by less than this are left alone.
constexpr double kSamePower = 1e-4;
constexpr int kMostAims = 3;

/// Makes the corrected powers those of the plan: the meters read a little more or less.
bool aim(std::vector<StepTruth>& truths, const RunResult& found) {
  bool moved = false;
  for (std::size_t i = 0; i < truths.size() && i < found.steps.size(); ++i) {
    std::vector<PortTruth>& ports = truths[i].ports;
    for (std::size_t p = 0; p < ports.size() && p < found.steps[i].ports.size(); ++p) {
      const Quantity& power = found.steps[i].ports[p].power;
      if (!power.known || !(power.value > 0.0) || !(ports[p].power_w > 0.0)) continue;
      const double factor = ports[p].power_w / power.value;
      if (std::abs(factor - 1.0) < kSamePower) continue;
      ports[p].current_factor *= factor;
      moved = true;
    }
  }
  return moved;
}

std::optional<BestAction> best_of(const std::vector<BudgetEntry>& budget) {
  std::optional<BestAction> best;
  for (const BudgetEntry& entry : budget) {
    if (entry.action.empty() || !entry.expanded_if_done) continue;
    if (!best || *entry.expanded_if_done < best->expanded_if_done)
      best = BestAction{entry.source, entry.action, *entry.expanded_if_done};
  }
  return best;
}

/// An ideal bench has no zeros and equal meters: what counts is how well that would be known.
std::string check_text(const BenchCheckResult& check) {
  if (!check.applied) return check.text;
  if (check.kind == "zero") return "zero of " + check.channel + ": takes the place of its specified offset";
  return "tie " + check.name + ": the ratio of " + check.channel + " would be known to \u00b1" +
         base::print_significant(100.0 * (check.ratio.high - check.ratio.low) / 2.0, 2) +
         " %, its offset to \u00b1" +
         base::print_significant((check.offset.high - check.offset.low) / 2.0, 2) + " " + check.offset.unit;
}

ForecastStep step_of(StepResult& result) {
  ForecastStep step;
  step.label = result.label;
  step.kind = result.kind;
  step.result_state = result.result_state;
  step.input_power = result.input_power;
  step.output_power = result.output_power;
  step.efficiency = result.efficiency;
  step.loss = result.loss;
  step.budget = std::move(result.budget);
  step.loss_budget = std::move(result.loss_budget);
  step.best = best_of(step.budget);
  step.best_for_loss = best_of(step.loss_budget);
  step.remarks = std::move(result.remarks);
  return step;
}

/// Leads that nobody declared weigh most at the greatest power: said there only.
void keep_worst_leads(Forecast& forecast) {
  constexpr std::string_view kLeads = "sensing is not declared";
  const auto most = std::max_element(
      forecast.steps.begin(), forecast.steps.end(),
      [](const auto& a, const auto& b) { return a.output_power.value < b.output_power.value; });
  for (auto step = forecast.steps.begin(); step != forecast.steps.end(); ++step) {
    if (step == most) continue;
    std::erase_if(step->remarks,
                  [&](const std::string& remark) { return remark.find(kLeads) != std::string::npos; });
  }
}

/// What every step says is said once.
void gather_remarks(Forecast& forecast) {
  std::map<std::string, std::size_t> counts;
  for (const ForecastStep& step : forecast.steps) {
    for (const std::string& remark : step.remarks) ++counts[remark];
  }
  const auto common = [&](const std::string& remark) {
    return forecast.steps.size() > 1 && counts[remark] == forecast.steps.size();
  };
  if (forecast.steps.empty()) return;
  for (const std::string& remark : forecast.steps.front().remarks) {
    if (common(remark)) forecast.remarks.push_back(remark);
  }
  for (ForecastStep& step : forecast.steps) std::erase_if(step.remarks, common);
}

}  // namespace

Forecast forecast(const setup::Hookup& hookup, const setup::Stair& stair, std::int64_t at_ns) {
  std::vector<StepTruth> truths = truths_of(hookup, stair);
  const auto evaluated = [&](Validate validating) {
    return evaluate(ideal_run(hookup, stair, truths, at_ns), hookup, stair, validating);
  };
  for (int i = 0; i < kMostAims && aim(truths, evaluated(Validate::no)); ++i) {
  }
  RunResult found = evaluated(Validate::yes);
  Forecast out;
  for (StepResult& result : found.steps) {
    if (result.kind == setup::name_of(setup::StepKind::zero)) continue;
    if (result.kind == setup::name_of(setup::StepKind::tie)) continue;
    out.steps.push_back(step_of(result));
  }
  for (const BenchCheckResult& check : found.bench_checks) out.bench_checks.push_back(check_text(check));
  keep_worst_leads(out);
  gather_remarks(out);
  return out;
}

}  // namespace loadstair::evaluation
