#include "analysis/settling/hold_out.h"

#include <algorithm>
#include <string>

#include "analysis/base/number.h"
#include "analysis/settling/approach.h"
#include "analysis/settling/words.h"

namespace loadstair::settling {
namespace {

using base::Outcome;
using base::Refusal;

constexpr std::size_t kLeastReadings = 20;

/// What would have been accepted after the first `count` readings, moved to the ambient of the trace's end.
std::optional<Interval> accepted_after(const Trace& trace, std::span<const double> ambient, std::size_t count,
                                       const PredictionCriterion& criterion) {
  const Trace early{trace.time_s.first(count), trace.value.first(count)};
  const auto early_ambient = ambient.empty() ? ambient : ambient.first(count);
  const std::vector<double> moved = moved_to_last_ambient(early, early_ambient);
  const Trace whole{early.time_s, moved};
  const auto prediction = predict_end(since(whole, stretch_begins(whole)), {}, criterion);
  if (!prediction || !prediction->accepted) return std::nullopt;
  const double shift = ambient.empty() ? 0.0 : ambient.back() - early_ambient.back();
  return Interval{prediction->end.value + shift, prediction->end.low + shift, prediction->end.high + shift};
}

std::string text_of(const HoldOut& out, bool changed_since) {
  std::string text =
      "after " + duration_text(out.after_s) + " a prediction of " +
      base::print_fixed(out.predicted.value, 2) + " (" + base::print_fixed(out.predicted.low, 2) + " to " +
      base::print_fixed(out.predicted.high, 2) + ") degC would have been accepted; " +
      duration_text(out.earlier_s) + " later the end is " + base::print_fixed(out.measured.value, 2) +
      " degC: off by " + base::print_fixed(out.error, 2) + " K, " +
      (out.held ? "within its interval" : "outside its interval");
  if (changed_since) text += "; something changed in between";
  return text;
}

}  // namespace

Outcome<std::optional<HoldOut>> hold_out(const Trace& trace, std::span<const double> ambient,
                                         const ThermalCriterion& criterion, const HoldOutSettings& settings) {
  if (const auto reason = disorder(trace)) return *reason;
  if (!ambient.empty() && ambient.size() != trace.size()) {
    return Refusal{"hold-out", "ambient has another number of readings"};
  }
  if (settings.instants < 2 || settings.instants > 1000) {
    return Refusal{"hold-out", "between 2 and 1000 instants can be tried"};
  }
  if (trace.size() < kLeastReadings) {
    return Refusal{"hold-out", "fewer than 20 readings: there is no earlier part to predict from"};
  }
  if (!criterion.prediction) return std::optional<HoldOut>{};
  if (!(criterion.prediction->tolerance > 0.0))
    return Refusal{"hold-out", "the tolerance must be above zero"};
  const double begin_s = trace.time_s.front();
  const double duration_s = trace.time_s.back() - begin_s;
  for (int k = 1; k < settings.instants; ++k) {
    const double cut_s = begin_s + duration_s * k / settings.instants;
    const auto count = static_cast<std::size_t>(
        std::upper_bound(trace.time_s.begin(), trace.time_s.end(), cut_s) - trace.time_s.begin());
    if (count < kLeastReadings || count == trace.size()) continue;
    const auto predicted = accepted_after(trace, ambient, count, *criterion.prediction);
    if (!predicted) continue;
    HoldOut out;
    out.after_s = trace.time_s[count - 1] - begin_s;
    out.earlier_s = trace.time_s.back() - trace.time_s[count - 1];
    out.predicted = *predicted;
    const std::vector<double> moved = moved_to_last_ambient(trace, ambient);
    const Trace whole{trace.time_s, moved};
    const double start_s = stretch_begins(whole);
    const Trace stretch = since(whole, start_s);
    out.measured = present_and_rest(stretch, fit_exponential(stretch), criterion.rate.window_s);
    // What is measured lies between the present value and what may still come: the middle, as the end
    // temperature of a result.
    out.measured.value = 0.5 * (out.measured.low + out.measured.high);
    out.error = out.predicted.value - out.measured.value;
    out.held = out.predicted.low <= out.measured.high && out.predicted.high >= out.measured.low;
    out.text = text_of(out, start_s > trace.time_s[count - 1]);
    return std::optional{out};
  }
  return std::optional<HoldOut>{};
}

}  // namespace loadstair::settling
