#include "simulation/study.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <utility>

#include "analysis/estimate/coverage.h"  // results are read through it: differences of estimates
#include "daemon/evaluation/forecast.h"
#include "simulation/draw.h"

namespace loadstair::simulation {
namespace {

constexpr std::size_t kLevels = 5;

Judged judge(const evaluation::Quantity& quantity, double truth, double implied) {
  Judged out;
  out.known = quantity.known && quantity.uncertainty_known;
  out.truth = truth;
  out.value = quantity.value;
  out.low = quantity.low;
  out.high = quantity.high;
  out.implied = implied;
  return out;
}

const efficiency::CurvePoint* point_of(const evaluation::RunResult& result, const std::string& label) {
  for (const efficiency::CurvePoint& point : result.points) {
    if (point.label == label) return &point;
  }
  return nullptr;
}

}  // namespace

double quantile(std::vector<double> values, double share) {
  if (values.empty()) return 0.0;
  const auto place =
      values.begin() + static_cast<std::ptrdiff_t>(share * static_cast<double>(values.size() - 1) + 0.5);
  std::nth_element(values.begin(), place, values.end());
  return *place;
}

double median(std::vector<double> values) {
  return quantile(std::move(values), 0.5);
}

void Tally::add(const Judged& one) {
  ++counted;
  if (one.holds()) ++holding;
  if (one.warned) ++warned;
  if (one.holds() || one.warned) ++holding_or_warned;
  if (!one.known) {
    ++unknown;
    return;
  }
  const double half_width = (one.high - one.low) / 2.0;
  if (one.implied > 0.0) width_ratios.push_back(half_width / one.implied);
  errors.push_back((one.value - one.truth) / half_width);
}

double Tally::share() const {
  return counted == 0 ? 0.0 : static_cast<double>(holding) / static_cast<double>(counted);
}

double Tally::share_with_warnings() const {
  return counted == 0 ? 0.0 : static_cast<double>(holding_or_warned) / static_cast<double>(counted);
}

double Tally::median_width_ratio() const {
  return median(width_ratios);
}

Outcome study(std::uint64_t seed, const StudyChoice& choice) {
  Outcome out;
  out.bench = draw_bench(seed, choice.bench);
  for (PortPlan* port : {&out.bench.input, &out.bench.output}) {
    for (Meter& meter : port->meters) {
      if (meter.repeatability_percent <= 0.0) meter.shares = choice.truth;
    }
  }
  // One step is counted, and one more is in the run, so that it is not the only one.
  const std::size_t level = seed % kLevels;
  const std::vector<std::size_t> levels = {level, (level + 2) % kLevels};
  const setup::Hookup hookup = hookup_of(out.bench);
  const Recorded a = record_run(out.bench, out.bench.board, levels, 1);
  const evaluation::RunResult result = evaluation::evaluate(a.run, hookup, a.stair, evaluation::Validate::no);
  const evaluation::StepResult& step = result.steps.front();
  const Truth& truth = a.truths.front();
  Bench declared = out.bench;  // what the file says of the shares decides what is implied
  for (PortPlan* port : {&declared.input, &declared.output}) {
    for (Meter& meter : port->meters) {
      if (meter.repeatability_percent <= 0.0) meter.shares = ErrorShares{};
    }
  }
  const Effects effects = effects_of(declared, a.middle.front());
  const Widths widths = widths_of(effects, truth);
  out.efficiency = judge(step.efficiency, truth.efficiency, widths.efficiency);
  out.loss = judge(step.loss, truth.loss_w, widths.loss_w);
  out.input = judge(step.input_power, truth.input_w, widths.input_w);
  out.output = judge(step.output_power, truth.output_w, widths.output_w);
  out.remarks = step.remarks;
  for (Judged* one : {&out.efficiency, &out.loss, &out.input, &out.output})
    one->warned = !step.remarks.empty();
  if (!choice.with_difference) return out;
  const Recorded b = record_run(out.bench, draw_board(mix(seed), out.bench.rated_w), levels, 2);
  const evaluation::RunResult other = evaluation::evaluate(b.run, hookup, b.stair, evaluation::Validate::no);
  const efficiency::CurvePoint* first = point_of(result, step.label);
  const efficiency::CurvePoint* second = point_of(other, step.label);
  out.difference.truth = b.truths.front().efficiency - truth.efficiency;
  out.difference.warned = !step.remarks.empty() || !other.steps.front().remarks.empty();
  if (first == nullptr || second == nullptr) return out;
  const estimate::Estimate difference = second->efficiency - first->efficiency;
  const estimate::Coverage covered = estimate::coverage(difference);
  out.difference.known = true;
  out.difference.value = covered.value;
  out.difference.low = covered.low;
  out.difference.high = covered.high;
  out.difference.implied =
      width_of_difference(effects, truth, effects_of(declared, b.middle.front()), b.truths.front());
  const double apart = first->efficiency.variance() + second->efficiency.variance();
  out.narrowing = std::sqrt(apart / difference.variance());
  const Widths of_second = widths_of(effects_of(declared, b.middle.front()), b.truths.front());
  out.expected_narrowing = std::hypot(widths.efficiency, of_second.efficiency) / out.difference.implied;
  return out;
}

Study run_study(std::uint64_t first, std::uint64_t draws, const StudyChoice& choice,
                const std::function<void(const Outcome&)>& each) {
  Study out;
  for (std::uint64_t i = 0; i < draws; ++i) {
    const Outcome one = study(first + i, choice);
    out.efficiency.add(one.efficiency);
    out.loss.add(one.loss);
    out.input.add(one.input);
    out.output.add(one.output);
    if (choice.with_difference) {
      out.difference.add(one.difference);
      if (one.narrowing > 0.0) {
        out.narrowing.push_back(one.narrowing);
        out.narrowing_against_expected.push_back(one.narrowing / one.expected_narrowing);
      }
    }
    if (each) each(one);
  }
  return out;
}

std::vector<double> forecast_ratios(std::uint64_t first, std::uint64_t draws) {
  std::vector<double> ratios;
  for (std::uint64_t seed = first; seed < first + draws; ++seed) {
    const Bench bench = draw_bench(seed);
    const setup::Hookup hookup = hookup_of(bench);
    const Recorded run = record_run(bench, bench.board, {seed % kLevels}, 1);
    const evaluation::Quantity got =
        evaluation::evaluate(run.run, hookup, run.stair, evaluation::Validate::no).steps.front().efficiency;
    const evaluation::Forecast told = evaluation::forecast(hookup, run.stair);
    if (told.steps.empty()) continue;
    const evaluation::Quantity& said = told.steps.front().efficiency;
    const bool both = got.known && got.uncertainty_known && said.known && said.uncertainty_known;
    if (both) ratios.push_back((said.high - said.low) / (got.high - got.low));
  }
  return ratios;
}

std::string described(const Study& study) {
  std::string text;
  const auto line = [&](const char* name, const Tally& tally) {
    if (tally.counted == 0) return;
    const std::vector<double>& ratios = tally.width_ratios;
    text += fmt::format(
        "{:<11}{:6.2f} % of {} hold ({} without a figure, {} with a remark, held or remarked {:.2f} %); "
        "half-width "
        "over noise-free {:.3f}, one in ten above {:.2f}\n",
        name, 100.0 * tally.share(), tally.counted, tally.unknown, tally.warned,
        100.0 * tally.share_with_warnings(), tally.median_width_ratio(), quantile(ratios, 0.9));
  };
  line("efficiency", study.efficiency);
  line("loss", study.loss);
  line("input", study.input);
  line("output", study.output);
  line("difference", study.difference);
  return text;
}

}  // namespace loadstair::simulation
