#include "analysis/settling/settling.h"

#include <algorithm>
#include <cmath>
#include <string>
#include <vector>

#include "analysis/base/number.h"
#include "analysis/estimate/coverage.h"
#include "analysis/series/correlation.h"
#include "analysis/series/line.h"
#include "analysis/settling/approach.h"
#include "analysis/settling/words.h"

namespace loadstair::settling {

using base::Outcome;
using base::Refusal;

std::optional<Refusal> disorder(const Trace& trace) {
  if (trace.time_s.size() != trace.value.size())
    return Refusal{"settling", "times and values differ in number"};
  for (std::size_t i = 0; i < trace.size(); ++i) {
    if (!std::isfinite(trace.value[i]) || !std::isfinite(trace.time_s[i]) ||
        (i > 0 && !(trace.time_s[i] > trace.time_s[i - 1]))) {
      return Refusal{"settling", "sample " + base::print_integer(static_cast<std::int64_t>(i) + 1) +
                                     ": times must rise and values be finite"};
    }
  }
  return std::nullopt;
}

std::string duration_text(double seconds) {
  if (seconds < 100.0) return base::print_significant(seconds, 2) + " s";
  if (seconds < 6000.0) return base::print_fixed(seconds / 60.0, seconds < 600.0 ? 1 : 0) + " min";
  return base::print_fixed(seconds / 3600.0, 1) + " h";
}

std::string value_text(double value) {
  return base::print_significant(value, 3);
}

Trace since(const Trace& trace, double t_s) {
  const auto first = static_cast<std::size_t>(
      std::lower_bound(trace.time_s.begin(), trace.time_s.end(), t_s) - trace.time_s.begin());
  return {trace.time_s.subspan(first), trace.value.subspan(first)};
}

base::Outcome<Verdict> settled_by_slope(const Trace& trace, const SlopeCriterion& criterion) {
  if (const auto reason = disorder(trace)) return *reason;
  if (!(criterion.window_s > 0.0) || !(criterion.limit_per_s > 0.0)) {
    return Refusal{"slope criterion", "window and limit must be above zero"};
  }
  Verdict out;
  const double have = trace.size() > 0 ? trace.time_s.back() - trace.time_s.front() : 0.0;
  // Readings come at their own pace: a window counts as full when less than one interval is missing.
  const double interval = trace.size() > 1 ? have / static_cast<double>(trace.size() - 1) : 0.0;
  if (have + interval < criterion.window_s) {
    out.why =
        "the window of " + duration_text(criterion.window_s) + " holds " + duration_text(have) + " so far";
    out.wait_s = criterion.window_s - have;
    return out;
  }
  const Trace window = since(trace, trace.time_s.back() - criterion.window_s);
  if (window.size() < std::max<std::size_t>(3, criterion.least_samples)) {
    out.why =
        base::print_integer(static_cast<std::int64_t>(window.size())) + " readings in the window; " +
        base::print_integer(static_cast<std::int64_t>(std::max<std::size_t>(3, criterion.least_samples))) +
        " are needed: poll faster or lengthen the window";
    return out;
  }
  const auto line = series::fit_line(window);
  if (!line) return line.refusal();
  const auto correlation = series::integrated_correlation(series::residuals(window, *line));
  const double freedom = std::max(1.0, correlation.effective_count - 2.0);
  const double half_width = estimate::student_t(estimate::kLevel, freedom) * line->slope_u_per_s *
                            std::sqrt(correlation.inefficiency);
  const double slope = std::abs(line->slope_per_s);
  const double limit = criterion.limit_per_s;
  const std::string measured = value_text(line->slope_per_s) + " +/- " + value_text(half_width) +
                               " per second, limit " + value_text(limit);
  const double now = line->at(window.time_s.back());
  if (slope + half_width <= limit) {
    out.settled = true;
    out.by = SettledBy::electrical_slope;
    out.wait_s = 0.0;
    out.why = "slope " + measured;
    const double spread = 2.0 * line->residual_deviation / std::sqrt(correlation.effective_count);
    out.end = Interval{now, now - spread, now + spread};
  } else if (slope - half_width > limit) {
    out.why = "still moving: slope " + measured;
  } else if (half_width > limit) {
    out.why = "the noise hides the slope: " + measured + "; lengthen the window or average longer";
  } else {
    out.why = "slope not yet surely within the limit: " + measured;
  }
  return out;
}

namespace {

constexpr double kEndShare = 1.0 / 20.0;  ///< of the window, over which the value at its end is found

}  // namespace

double value_at(const Trace& trace, double t_s, double stretch_s) {
  const auto begin = trace.time_s.begin();
  const auto past = static_cast<std::size_t>(std::upper_bound(begin, trace.time_s.end(), t_s) - begin);
  const auto first =
      static_cast<std::size_t>(std::lower_bound(begin, trace.time_s.end(), t_s - stretch_s) - begin);
  if (past >= first + 3) {
    const auto line = series::fit_line(
        {trace.time_s.subspan(first, past - first), trace.value.subspan(first, past - first)});
    if (line) return line->at(t_s);
  }
  if (past == 0) return trace.value.front();
  if (past == trace.size()) return trace.value.back();
  const double share = (t_s - trace.time_s[past - 1]) / (trace.time_s[past] - trace.time_s[past - 1]);
  return trace.value[past - 1] + share * (trace.value[past] - trace.value[past - 1]);
}

Interval present_and_rest(const Trace& trace, const base::Outcome<ExponentialFit>& fit, double window_s) {
  const double now = value_at(trace, trace.time_s.back(), window_s * kEndShare);
  Interval end{now, now, now};
  if (!fit) return end;
  const double inflation = std::sqrt(static_cast<double>(fit->points) / fit->effective_points);
  const double half_width = 2.0 * fit->end_standard_error * inflation;
  end.low = std::min(now, fit->end - half_width);
  end.high = std::max(now, fit->end + half_width);
  return end;
}

namespace {

/// Readings with their running sum, so that the mean between two instants costs two look-ups.
class Course {
 public:
  explicit Course(const Trace& trace) : trace_{trace}, sum_(trace.size() + 1, 0.0) {
    for (std::size_t i = 0; i < trace.size(); ++i) sum_[i + 1] = sum_[i] + (trace.value[i] - trace.value[0]);
    double squares = 0.0;
    for (std::size_t i = 2; i < trace.size(); ++i) {
      const double second = trace.value[i] - 2.0 * trace.value[i - 1] + trace.value[i - 2];
      squares += second * second;
    }
    if (trace.size() > 2) noise_ = std::sqrt(squares / (6.0 * static_cast<double>(trace.size() - 2)));
  }

  [[nodiscard]] const Trace& trace() const { return trace_; }
  /// Deviation of single readings from a smooth course, from second differences.
  [[nodiscard]] double noise() const { return noise_; }
  /// First reading at or after t.
  [[nodiscard]] std::size_t from(double t_s) const {
    return static_cast<std::size_t>(std::lower_bound(trace_.time_s.begin(), trace_.time_s.end(), t_s) -
                                    trace_.time_s.begin());
  }
  /// Mean of the readings [first, past), less the first value of all.
  [[nodiscard]] double mean(std::size_t first, std::size_t past) const {
    return (sum_[past] - sum_[first]) / static_cast<double>(past - first);
  }

 private:
  Trace trace_;
  std::vector<double> sum_;
  double noise_ = 0.0;
};

/// How far the course rises at most, and falls at most, from an earlier part of a window to a later one,
/// beyond what noise makes of the means of parts: a cycle that fits the window has equal ends.
struct Excursion {
  double rise = 0.0, fall = 0.0;
};

Excursion excursion(const Course& course, double begin_s, double end_s) {
  constexpr int kParts = 20;
  // Between the largest and the least of 20 means lie less than 5 of their deviations in 99 % of cases
  // (tables of the studentised range).
  constexpr double kNoiseRange = 5.0;
  Excursion out;
  double least = 0.0;
  double most = 0.0;
  std::size_t fewest = 0;
  for (int part = 0; part < kParts; ++part) {
    const std::size_t first = course.from(begin_s + (end_s - begin_s) * part / kParts);
    const std::size_t past = course.from(begin_s + (end_s - begin_s) * (part + 1) / kParts);
    if (past == first) continue;
    const double mean = course.mean(first, past);
    const bool fresh = fewest == 0;
    least = fresh ? mean : std::min(least, mean);
    most = fresh ? mean : std::max(most, mean);
    fewest = fresh ? past - first : std::min(fewest, past - first);
    out.rise = std::max(out.rise, mean - least);
    out.fall = std::max(out.fall, most - mean);
  }
  const double noise = kNoiseRange * course.noise() / std::sqrt(std::max(1.0, static_cast<double>(fewest)));
  out.rise -= noise;
  out.fall -= noise;
  return out;
}

struct RateCheck {
  bool holds = false;
  double largest = 0.0;  ///< signed change of the window that changed most
};

/// One window: what lies between its ends, or more where it went up and down within.
double change_within(const Course& course, double begin_s, double end_s, double between_ends) {
  const Excursion within = excursion(course, begin_s, end_s);
  double change = between_ends;
  if (within.rise > std::abs(change)) change = within.rise;
  if (within.fall > std::abs(change)) change = -within.fall;
  return change;
}

/// `count` windows one after another, the last one ending at t.
RateCheck rate_at(const Course& course, double t_s, const RateCriterion& criterion) {
  RateCheck out{true, 0.0};
  const double stretch_s = criterion.window_s * kEndShare;
  double later = value_at(course.trace(), t_s, stretch_s);
  for (int w = 1; w <= criterion.count; ++w) {
    const double end_s = t_s - (w - 1) * criterion.window_s;
    const double begin_s = t_s - w * criterion.window_s;
    const double earlier = value_at(course.trace(), begin_s, stretch_s);
    double change = later - earlier;
    if (criterion.rise_only) {
      const double rise = std::max(change, excursion(course, begin_s, end_s).rise);
      if (rise > criterion.change) out.holds = false;
      if (rise > change && rise > 0.0) change = rise;
    } else {
      change = change_within(course, begin_s, end_s, change);
      if (std::abs(change) > criterion.change) out.holds = false;
    }
    if (std::abs(change) > std::abs(out.largest)) out.largest = change;
    later = earlier;
  }
  return out;
}

/// From the fitted constant: when the first of `count` windows changes by no more than the criterion's
/// change, plus the hold. Source: the closed form of one exponential, change over w = A
/// exp(-t/tau)(exp(w/tau) - 1).
std::optional<double> expected_wait(const ExponentialFit& fit, double now_s, const RateCriterion& criterion) {
  const double tau = fit.tau_s[0];
  const double growth = std::expm1(criterion.window_s / tau);
  const double met = fit.start_s + tau * std::log(std::abs(fit.amplitude[0]) * growth / criterion.change);
  const double wait = met + (criterion.count - 1) * criterion.window_s + criterion.hold_s - now_s;
  if (!std::isfinite(wait)) return std::nullopt;
  return std::max(0.0, wait);
}

std::string rate_text(const RateCriterion& criterion) {
  std::string text = value_text(criterion.change) + " in " + duration_text(criterion.window_s);
  if (criterion.count > 1) text += ", " + base::print_integer(criterion.count) + " windows in a row";
  if (criterion.hold_s > 0.0) text += ", held for " + duration_text(criterion.hold_s);
  return text;
}

/// Instants at which a hold is checked: all samples of the hold, thinned to 200.
std::vector<double> hold_instants(const Trace& trace, double hold_s) {
  const double now = trace.time_s.back();
  if (!(hold_s > 0.0)) return {now};
  const Trace held = since(trace, now - hold_s);
  const std::size_t stride = std::max<std::size_t>(1, held.size() / 200);
  std::vector<double> instants;
  for (std::size_t i = 0; i < held.size(); i += stride) instants.push_back(held.time_s[i]);
  if (instants.back() < now) instants.push_back(now);
  return instants;
}

}  // namespace

base::Outcome<Verdict> settled_by_rate(const Trace& trace, const RateCriterion& criterion) {
  if (const auto reason = disorder(trace)) return *reason;
  if (!(criterion.change > 0.0) || !(criterion.window_s > 0.0) || criterion.count < 1 ||
      !(criterion.hold_s >= 0.0)) {
    return Refusal{"rate criterion",
                   "change and window must be above zero, the count at least 1, the hold not negative"};
  }
  Verdict out;
  const double have = trace.size() > 0 ? trace.time_s.back() - trace.time_s.front() : 0.0;
  const double needed = criterion.count * criterion.window_s + criterion.hold_s;
  const double interval = trace.size() > 1 ? have / static_cast<double>(trace.size() - 1) : 0.0;
  const auto fit = trace.size() >= 5 ? fit_exponential(trace) : Outcome<ExponentialFit>{Refusal{}};
  if (trace.size() < 2 || have + interval < needed) {
    out.wait_s = needed - have;
    if (fit) {
      const auto expected = expected_wait(*fit, trace.time_s.back(), criterion);
      if (expected) out.wait_s = std::max(*out.wait_s, *expected);
    }
    out.why = rate_text(criterion) + " takes " + duration_text(needed) + " of readings; there are " +
              duration_text(have);
    return out;
  }
  out.settled = true;
  RateCheck worst{true, 0.0};
  const Course course{trace};
  for (const double t : hold_instants(trace, criterion.hold_s)) {
    const RateCheck check = rate_at(course, t, criterion);
    out.settled = out.settled && check.holds;
    if (std::abs(check.largest) > std::abs(worst.largest)) worst = check;
  }
  const std::string changed =
      "changed by " + value_text(worst.largest) + "; criterion " + rate_text(criterion);
  if (!out.settled) {
    out.why = "still changing: " + changed;
    if (fit) out.wait_s = expected_wait(*fit, trace.time_s.back(), criterion);
    return out;
  }
  out.by = SettledBy::thermal_rate;
  out.why = changed;
  out.wait_s = 0.0;
  out.end = present_and_rest(trace, fit, criterion.window_s);
  return out;
}

std::vector<double> moved_to_last_ambient(const Trace& trace, std::span<const double> ambient) {
  std::vector<double> moved(trace.value.begin(), trace.value.end());
  for (std::size_t i = 0; i < ambient.size(); ++i) moved[i] += ambient.back() - ambient[i];
  return moved;
}

double stretch_begins(const Trace& trace) {
  const auto changes = change_points(trace);
  return changes && !changes->empty() ? changes->back() : trace.time_s.front();
}

base::Outcome<Verdict> settled_thermally(const Trace& trace, std::span<const double> ambient,
                                         const ThermalCriterion& criterion) {
  if (const auto reason = disorder(trace)) return *reason;
  if (!ambient.empty() && ambient.size() != trace.size()) {
    return Refusal{"settling", "ambient has another number of readings"};
  }
  if (trace.size() < 2) return settled_by_rate(trace, criterion.rate);
  const std::vector<double> moved = moved_to_last_ambient(trace, ambient);
  const Trace whole{trace.time_s, moved};
  const double start_s = stretch_begins(whole);
  const Trace stretch = since(whole, start_s);
  Outcome<Verdict> by_rate = settled_by_rate(stretch, criterion.rate);
  if (!by_rate) return by_rate;
  const std::string restarted =
      start_s > trace.time_s.front()
          ? "; counted from a change " + duration_text(trace.time_s.back() - start_s) + " ago"
          : "";
  by_rate->why += restarted;
  if (!criterion.prediction || by_rate->settled) return by_rate;
  const auto prediction = predict_end(stretch, {}, *criterion.prediction);
  if (!prediction) {
    by_rate->why += "; no prediction: " + prediction.refusal().reason;
    return by_rate;
  }
  Verdict out = by_rate.value();
  out.end = prediction->end;
  out.end_predicted = true;
  if (prediction->accepted && criterion.prediction->may_end_step) {
    out.settled = true;
    out.by = SettledBy::prediction;
    out.why = prediction->why + restarted;
    out.wait_s = 0.0;
    return out;
  }
  out.why += "; prediction: " + prediction->why;
  if (criterion.prediction->may_end_step && prediction->wait_s) {
    out.wait_s = out.wait_s ? std::min(*out.wait_s, *prediction->wait_s) : *prediction->wait_s;
  }
  return out;
}

}  // namespace loadstair::settling
