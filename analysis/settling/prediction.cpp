#include <algorithm>
#include <cmath>
#include <string>
#include <vector>

#include "analysis/base/number.h"
#include "analysis/estimate/coverage.h"
#include "analysis/settling/approach.h"
#include "analysis/settling/exponential.h"
#include "analysis/settling/runs.h"
#include "analysis/settling/settling.h"
#include "analysis/settling/words.h"

namespace loadstair::settling {
namespace {

using base::Outcome;
using base::Refusal;

/// Residuals are correlated by the meter's filter and resolution: standard errors grow by sqrt(N / N_eff).
double coverage_of(const ExponentialFit& fit) {
  const double parameters = static_cast<double>(fit.points - fit.degrees_of_freedom);
  const double freedom = std::max(1.0, fit.effective_points - parameters);
  return estimate::student_t(estimate::kLevel, freedom) *
         std::sqrt(static_cast<double>(fit.points) / fit.effective_points);
}

Interval end_of(const ExponentialFit& fit) {
  const double half_width = coverage_of(fit) * fit.end_standard_error;
  return {fit.end, fit.end - half_width, fit.end + half_width};
}

double tau_high_of(const ExponentialFit& fit) {
  return fit.tau_s.back() * std::exp(coverage_of(fit) * fit.tau_standard_error_s.back() / fit.tau_s.back());
}

void widen(Interval& interval, const Interval& other) {
  interval.low = std::min(interval.low, other.low);
  interval.high = std::max(interval.high, other.high);
}

/// End of the second half on its own: one constant, or the mean where nothing moves any more.
Interval end_of_half(const Trace& half) {
  const auto fit = fit_exponential(half);
  if (fit) return end_of(*fit);
  double mean = 0.0;
  for (const double value : half.value) mean += value / static_cast<double>(half.size());
  double square = 0.0;
  for (const double value : half.value) square += (value - mean) * (value - mean);
  const double half_width = 2.0 * std::sqrt(square) / static_cast<double>(half.size());
  return {mean, mean - half_width, mean + half_width};
}

std::vector<double> residuals_of(const ExponentialFit& fit, const Trace& trace) {
  std::vector<double> residual;
  for (std::size_t i = 0; i < trace.size(); ++i) residual.push_back(trace.value[i] - fit.at(trace.time_s[i]));
  return residual;
}

/// Ends that the readings allow when a slower constant is at work beside the found ones: for constants from
/// twice the longest found to the slowest, the fit goes on from the found one with that constant given.
void widen_for_hidden(Interval& end, const Trace& trace, const ExponentialFit& model, double slowest_tau_s) {
  const ScaledTrace whole = fitting_points(trace);
  std::vector<double> rates;
  for (const double tau : model.tau_s) rates.push_back(whole.span_s / tau);
  rates.push_back(0.0);
  constexpr int kSteps = 3;
  const double first = std::min(2.0 * model.longest_tau_s(), slowest_tau_s);
  for (int step = 0; step < kSteps; ++step) {
    const double tau = first * std::pow(slowest_tau_s / first, step / static_cast<double>(kSteps - 1));
    rates.back() = whole.span_s / tau;
    const auto hidden = descend({true, false, true}, whole.points(), rates);
    if (hidden) widen(end, end_of(to_fit(*hidden, trace, whole)));
  }
}

struct Conditions {
  std::vector<std::string> failed;
  double wait_s = 0.0;

  void fail(const std::string& what, double wait) {
    failed.push_back(what);
    wait_s = std::max(wait_s, wait);
  }
};

void judge(Prediction& out, const PredictionCriterion& criterion, double present, double start_value) {
  Conditions conditions;
  const double tau = out.two ? out.two->longest_tau_s() : out.one.longest_tau_s();
  out.window_long_enough = out.window_s >= 2.0 * out.longest_tau_high_s;
  if (!out.window_long_enough) {
    conditions.fail("the window of " + duration_text(out.window_s) +
                        " is shorter than twice the time constant, up to " +
                        duration_text(out.longest_tau_high_s),
                    2.0 * out.longest_tau_high_s - out.window_s);
  }
  constexpr double kLeastShare = 0.8;
  out.observed_share = (present - start_value) / (out.end.value - start_value);
  out.enough_rise = out.observed_share >= kLeastShare;
  if (!out.enough_rise) {
    conditions.fail(
        base::print_fixed(100.0 * out.observed_share, 0) + " % of the rise is observed, 80 % are needed",
        tau * std::log((1.0 - out.observed_share) / (1.0 - kLeastShare)));
  }
  if (!out.halves_agree) {
    conditions.fail("the last half of the window ends elsewhere than the whole", 0.25 * out.window_s);
  }
  if (!out.residuals_random) {
    conditions.fail("the readings leave the fitted curve in runs: another constant is at work",
                    0.25 * out.window_s);
  }
  const double remaining = std::max(std::abs(out.remaining.low), std::abs(out.remaining.high));
  out.remaining_small = remaining < criterion.tolerance;
  if (!out.remaining_small) {
    conditions.fail(
        "up to " + value_text(remaining) + " may be missing, tolerance " + value_text(criterion.tolerance),
        tau * std::log(remaining / criterion.tolerance));
  }
  out.accepted = conditions.failed.empty();
  if (out.accepted) {
    out.why = "predicted end " + base::print_fixed(out.end.value, 2) + ", between " +
              base::print_fixed(out.end.low, 2) + " and " + base::print_fixed(out.end.high, 2) + "; up to " +
              value_text(remaining) + " missing";
    out.wait_s = 0.0;
    return;
  }
  for (const std::string& reason : conditions.failed) out.why += (out.why.empty() ? "" : "; ") + reason;
  if (std::isfinite(conditions.wait_s)) out.wait_s = std::max(0.0, conditions.wait_s);
}

}  // namespace

base::Outcome<Prediction> predict_end(const Trace& trace, std::span<const double> ambient,
                                      const PredictionCriterion& criterion) {
  if (const auto reason = disorder(trace)) return *reason;
  if (!ambient.empty() && ambient.size() != trace.size()) {
    return Refusal{"prediction", "ambient has another number of readings"};
  }
  if (!(criterion.tolerance > 0.0)) return Refusal{"prediction", "the tolerance must be above zero"};
  const std::vector<double> moved = moved_to_last_ambient(trace, ambient);
  const Trace rise{trace.time_s, moved};
  const Outcome<ExponentialFit> one = fit_exponential(rise);
  if (!one) return one.refusal();
  Prediction out;
  out.one = *one;
  if (auto two = fit_two_exponentials(rise)) out.two = std::move(two).value();
  const ExponentialFit& model = out.two ? *out.two : out.one;
  out.window_s = trace.time_s.back() - trace.time_s.front();
  out.longest_tau_high_s = tau_high_of(model);
  out.end = end_of(model);
  const Trace half = since(rise, trace.time_s.front() + 0.5 * out.window_s);
  const Interval half_end = end_of_half(half);
  out.halves_agree = half_end.low <= out.end.high && half_end.high >= out.end.low;
  // A misfit of a hundredth of the tolerance decides nothing, whatever its signs.
  constexpr double kNegligible = 0.01;
  out.residuals_random = model.residual_standard_deviation < kNegligible * criterion.tolerance ||
                         random_signs(residuals_of(model, rise));
  // One constant where two are resolved is a model known to be wrong; it still belongs to the envelope when
  // it fits.
  if (out.two && random_signs(residuals_of(out.one, rise))) widen(out.end, end_of(out.one));
  const double slowest = criterion.slowest_tau_s > 0.0
                             ? criterion.slowest_tau_s
                             : std::max(5.0 * model.longest_tau_s(), 3.0 * out.window_s);
  if (slowest > model.longest_tau_s()) widen_for_hidden(out.end, rise, model, slowest);
  const double present = model.at(trace.time_s.back());
  out.remaining = {out.end.value - present, out.end.low - present, out.end.high - present};
  judge(out, criterion, present, model.at(trace.time_s.front()));
  return out;
}

}  // namespace loadstair::settling
