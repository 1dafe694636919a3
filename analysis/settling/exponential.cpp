#include "analysis/settling/exponential.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <string>

#include "analysis/base/number.h"
#include "analysis/series/correlation.h"
#include "analysis/settling/runs.h"
#include "analysis/settling/settling.h"

namespace loadstair::settling {
namespace {

using base::Outcome;
using base::Refusal;

constexpr std::size_t kMostReadings = 256;
constexpr std::size_t kMostBlocks = 128;
constexpr double kSlowest = 1e-3;  ///< slowest rate of the search, per span: tau = 1000 spans

std::string count_text(std::size_t count) {
  return base::print_integer(static_cast<std::int64_t>(count));
}

std::optional<Refusal> unfit(const Trace& trace, std::size_t least) {
  if (trace.time_s.size() != trace.value.size())
    return Refusal{"exponential fit", "times and values differ in number"};
  if (trace.size() < least) {
    return Refusal{"exponential fit",
                   count_text(trace.size()) + " samples are too few; " + count_text(least) + " are needed"};
  }
  for (std::size_t i = 0; i < trace.size(); ++i) {
    if (!std::isfinite(trace.value[i]) || !std::isfinite(trace.time_s[i]) ||
        (i > 0 && !(trace.time_s[i] > trace.time_s[i - 1]))) {
      return Refusal{"exponential fit",
                     "sample " + count_text(i + 1) + ": times must rise and values be finite"};
    }
  }
  return std::nullopt;
}

/// Rates per span, slow to fast, evenly spaced in their logarithm.
std::vector<double> rate_grid(double slow, double fast, int steps) {
  std::vector<double> rates;
  for (int i = 0; i < steps; ++i)
    rates.push_back(slow * std::pow(fast / slow, i / static_cast<double>(steps - 1)));
  return rates;
}

double sum_of_squares_about_mean(std::span<const double> y) {
  double mean = 0.0;
  for (const double value : y) mean += value / static_cast<double>(y.size());
  double sum = 0.0;
  for (const double value : y) sum += (value - mean) * (value - mean);
  return sum;
}

Refusal flat() {
  return {"exponential fit", "no rise stands out of the noise"};
}

}  // namespace

ScaledTrace scaled(const Trace& trace) {
  ScaledTrace out;
  out.span_s = trace.time_s.back() - trace.time_s.front();
  out.x.resize(trace.size());
  for (std::size_t i = 0; i < trace.size(); ++i)
    out.x[i] = (trace.time_s[i] - trace.time_s.front()) / out.span_s;
  out.y.assign(trace.value.begin(), trace.value.end());
  return out;
}

ScaledTrace block_means(const ScaledTrace& trace, std::size_t most) {
  const std::size_t count = trace.x.size();
  if (count <= most) return trace;
  ScaledTrace out;
  out.span_s = trace.span_s;
  for (std::size_t b = 0; b < most; ++b) {
    const std::size_t first = b * count / most;
    const std::size_t past = (b + 1) * count / most;
    const double size = static_cast<double>(past - first);
    double x = 0.0;
    double y = 0.0;
    for (std::size_t i = first; i < past; ++i) {
      x += trace.x[i];
      y += trace.y[i];
    }
    x /= size;
    double spread = 0.0;
    for (std::size_t i = first; i < past; ++i) {
      spread += (trace.x[i] - x) * (trace.x[i] - x) + (trace.spread.empty() ? 0.0 : trace.spread[i]);
    }
    out.x.push_back(x);
    out.y.push_back(y / size);
    out.spread.push_back(spread / size);
  }
  return out;
}

ScaledTrace fitting_points(const Trace& trace) {
  const ScaledTrace whole = scaled(trace);
  return whole.x.size() > kMostReadings ? block_means(whole, kMostBlocks) : whole;
}

namespace {

/// Sums of products of the grid's columns, so that each choice of rates is a small system.
class Grid {
 public:
  Grid(const ScaledTrace& trace, std::vector<double> rates, bool pairs) : rates_{std::move(rates)} {
    const std::size_t n = rates_.size();
    const std::size_t count = trace.x.size();
    double mean = 0.0;
    for (const double y : trace.y) mean += y / static_cast<double>(count);
    std::vector<Column> columns(n, Column(count));
    for (std::size_t r = 0; r < n; ++r) {
      double column_mean = 0.0;
      for (std::size_t i = 0; i < count; ++i) {
        columns[r][i] = std::exp(-rates_[r] * trace.x[i]);
        column_mean += columns[r][i] / static_cast<double>(count);
      }
      for (double& value : columns[r]) value -= column_mean;
    }
    products_.assign(n, std::vector<double>(n, 0.0));
    right_.assign(n, 0.0);
    for (std::size_t i = 0; i < count; ++i) total_ += (trace.y[i] - mean) * (trace.y[i] - mean);
    for (std::size_t r = 0; r < n; ++r) {
      for (std::size_t i = 0; i < count; ++i) right_[r] += columns[r][i] * (trace.y[i] - mean);
      for (std::size_t q = pairs ? 0 : r; q <= r; ++q) {
        for (std::size_t i = 0; i < count; ++i) products_[r][q] += columns[r][i] * columns[q][i];
      }
    }
  }

  [[nodiscard]] std::size_t size() const { return rates_.size(); }
  [[nodiscard]] double rate(std::size_t r) const { return rates_[r]; }
  [[nodiscard]] double sum_with(std::size_t r) const {
    return products_[r][r] > 0.0 ? total_ - right_[r] * right_[r] / products_[r][r] : total_;
  }
  /// q < r; only when built with pairs.
  [[nodiscard]] double sum_with(std::size_t r, std::size_t q) const {
    const double determinant = products_[r][r] * products_[q][q] - products_[r][q] * products_[r][q];
    if (!(determinant > 1e-12 * products_[r][r] * products_[q][q])) return total_;
    const double a = (right_[r] * products_[q][q] - right_[q] * products_[r][q]) / determinant;
    const double b = (right_[q] * products_[r][r] - right_[r] * products_[r][q]) / determinant;
    return total_ - a * right_[r] - b * right_[q];
  }

 private:
  std::vector<double> rates_;
  std::vector<std::vector<double>> products_;
  std::vector<double> right_;
  double total_ = 0.0;
};

constexpr std::size_t kGridPoints = 64;

}  // namespace

namespace {

struct Coarse {
  double rate = 0.0;
  double residual_sum_of_squares = 0.0;
};

Coarse best_of_grid(const ScaledTrace& trace) {
  const double fastest = 2.0 * static_cast<double>(trace.x.size());
  const Grid grid{block_means(trace, kGridPoints), rate_grid(kSlowest, fastest, 48), false};
  std::size_t best = 0;
  for (std::size_t r = 1; r < grid.size(); ++r) {
    if (grid.sum_with(r) < grid.sum_with(best)) best = r;
  }
  return {grid.rate(best), grid.sum_with(best)};
}

}  // namespace

double coarse_sum_one(const ScaledTrace& trace) {
  return best_of_grid(trace).residual_sum_of_squares;
}

std::optional<ExponentialSolution> search_one(const ScaledTrace& trace) {
  return descend({true, false, false}, trace.points(), {best_of_grid(trace).rate});
}

std::optional<ExponentialSolution> search_two(const ScaledTrace& trace) {
  const ScaledTrace coarse = block_means(trace, 2 * kGridPoints);
  const Grid grid{coarse, rate_grid(0.05, 0.5 * static_cast<double>(coarse.x.size()), 18), true};
  double least = std::numeric_limits<double>::infinity();
  std::vector<double> best;
  for (std::size_t r = 1; r < grid.size(); ++r) {
    for (std::size_t q = 0; q < r; ++q) {
      const double sum = grid.sum_with(r, q);
      if (sum < least) {
        least = sum;
        best = {grid.rate(r), grid.rate(q)};
      }
    }
  }
  if (best.empty()) return std::nullopt;
  return descend({true, false, false}, trace.points(), best);
}

double ExponentialFit::at(double t_s) const {
  double value = end;
  for (std::size_t i = 0; i < tau_s.size(); ++i)
    value -= amplitude[i] * std::exp(-(t_s - start_s) / tau_s[i]);
  return value;
}

ExponentialFit to_fit(const ExponentialSolution& solution, const Trace& trace,
                      const ScaledTrace& scaled_trace) {
  ExponentialFit fit;
  fit.start_s = trace.time_s.front();
  fit.samples = trace.size();
  fit.points = scaled_trace.x.size();
  const std::size_t terms = solution.rate.size();
  fit.degrees_of_freedom = fit.points - 1 - 2 * terms;
  fit.residual_sum_of_squares = solution.residual_sum_of_squares;
  fit.residual_standard_deviation =
      std::sqrt(solution.residual_sum_of_squares /
                static_cast<double>(std::max<std::size_t>(1, fit.degrees_of_freedom)));
  const double s = fit.residual_standard_deviation;
  fit.end = solution.linear[0];
  fit.end_standard_error = s * std::sqrt(solution.linear_variance_factor[0]);
  std::vector<std::size_t> order(terms);
  for (std::size_t i = 0; i < terms; ++i) order[i] = i;
  std::sort(order.begin(), order.end(),
            [&](std::size_t a, std::size_t b) { return solution.rate[a] > solution.rate[b]; });
  for (const std::size_t i : order) {
    const double tau = scaled_trace.span_s / solution.rate[i];
    fit.amplitude.push_back(-solution.linear[i + 1]);
    fit.amplitude_standard_error.push_back(s * std::sqrt(solution.linear_variance_factor[i + 1]));
    fit.tau_s.push_back(tau);
    fit.tau_standard_error_s.push_back(tau * s * std::sqrt(solution.log_rate_variance_factor[i]));
  }
  fit.effective_points = series::integrated_correlation(solution.residual).effective_count;
  return fit;
}

base::Outcome<ExponentialFit> fit_exponential(const Trace& trace) {
  if (const auto reason = unfit(trace, 5)) return *reason;
  const ScaledTrace whole = fitting_points(trace);
  const auto found = search_one(whole);
  if (!found) return flat();
  const double about_mean = sum_of_squares_about_mean(whole.y);
  ExponentialFit fit = to_fit(*found, trace, whole);
  // F test of two more parameters on as many samples as are independent; 10 is beyond the 0.1 % point for 15
  // or more.
  const double freedom = std::max(1.0, fit.effective_points - 3.0);
  constexpr double kStandsOut = 10.0;
  if (!((about_mean - fit.residual_sum_of_squares) / 2.0 >
        kStandsOut * fit.residual_sum_of_squares / freedom) ||
      !(about_mean > 0.0)) {
    return flat();
  }
  if (found->rate[0] < 2.0 * kSlowest) {
    return Refusal{"exponential fit", "the trace does not bend: its end cannot be seen yet"};
  }
  if (found->rate[0] > static_cast<double>(whole.x.size())) {
    return Refusal{"exponential fit", "the trace jumps within one sample: no time constant can be seen"};
  }
  return fit;
}

base::Outcome<ExponentialFit> fit_two_exponentials(const Trace& trace) {
  if (const auto reason = unfit(trace, 8)) return *reason;
  const ScaledTrace whole = fitting_points(trace);
  const Refusal unresolved{"exponential fit", "a second time constant is not resolved"};
  const auto one = search_one(whole);
  // Where one constant leaves nothing but noise, a second one is not there to be found.
  if (!one || random_signs(one->residual)) return unresolved;
  const auto two = search_two(whole);
  if (!two) return unresolved;
  ExponentialFit fit = to_fit(*two, trace, whole);
  const double freedom = std::max(1.0, fit.effective_points - 5.0);
  constexpr double kStandsOut = 10.0;
  const bool better = (one->residual_sum_of_squares - two->residual_sum_of_squares) / 2.0 >
                      kStandsOut * two->residual_sum_of_squares / freedom;
  constexpr double kLeastRatio = 1.3, kMostSpans = 50.0, kMostRelativeError = 0.5;
  const bool apart = fit.tau_s[1] > kLeastRatio * fit.tau_s[0] && fit.tau_s[1] < kMostSpans * whole.span_s;
  const double inflation = std::sqrt(static_cast<double>(fit.points) / fit.effective_points);
  const bool sharp = fit.tau_standard_error_s[0] * inflation < kMostRelativeError * fit.tau_s[0] &&
                     fit.tau_standard_error_s[1] * inflation < kMostRelativeError * fit.tau_s[1];
  if (!better || !apart || !sharp) return unresolved;
  return fit;
}

}  // namespace loadstair::settling
