#include "analysis/efficiency/fold_back.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <numeric>
#include <optional>

#include "analysis/base/number.h"
#include "analysis/estimate/coverage.h"
#include "analysis/estimate/sharing.h"

namespace loadstair::efficiency {
namespace {

constexpr std::size_t kLeastOnEach = 2;
constexpr double kDeviations = 4;
/// No point is taken as known better than this share of the largest one: exact points still need a scale.
constexpr double kLeastSpread = 1e-4;

struct Line {
  double at_zero = 0, slope = 0;
  double squares = 0;  ///< of the residuals

  [[nodiscard]] double at(double x) const { return at_zero + slope * x; }
};

Line fit(std::span<const double> x, std::span<const double> y) {
  const auto n = static_cast<double>(x.size());
  const double mean_x = std::accumulate(x.begin(), x.end(), 0.0) / n;
  const double mean_y = std::accumulate(y.begin(), y.end(), 0.0) / n;
  double sxx = 0;
  double sxy = 0;
  for (std::size_t i = 0; i < x.size(); ++i) {
    sxx += (x[i] - mean_x) * (x[i] - mean_x);
    sxy += (x[i] - mean_x) * (y[i] - mean_y);
  }
  Line out;
  out.slope = sxx > 0 ? sxy / sxx : 0;
  out.at_zero = mean_y - out.slope * mean_x;
  for (std::size_t i = 0; i < x.size(); ++i) {
    const double residual = y[i] - out.at(x[i]);
    out.squares += residual * residual;
  }
  return out;
}

/// Currents and voltages along the characteristic.
struct Points {
  std::vector<double> current, voltage;
  double current_spread = 0, voltage_spread = 0;  ///< of one point, without what all share

  [[nodiscard]] std::size_t size() const { return current.size(); }
  [[nodiscard]] Line line(std::size_t many) const {
    return fit(std::span{current}.first(many), std::span{voltage}.first(many));
  }
  [[nodiscard]] Line branch(std::size_t from) const {
    return fit(std::span{voltage}.subspan(from), std::span{current}.subspan(from));
  }
};

struct Knee {
  double current = 0, voltage = 0;
};

/// Where V = a + b I meets I = c + d V.
std::optional<Knee> crossing(const Line& line, const Line& branch) {
  const double below = 1 - branch.slope * line.slope;
  const double current = (branch.at_zero + branch.slope * line.at_zero) / below;
  if (!(below > 0.1) || !std::isfinite(current)) return std::nullopt;
  return Knee{current, line.at(current)};
}

/// Steeper, or falling back: |dV/dI| of the branch well above that of the line, or of the other sign.
bool is_branch(const Line& line, const Line& branch) {
  return branch.slope * line.slope <= 1 / kSteeper;
}

double chi_squared(const Points& points, std::size_t split) {
  const Line line = points.line(split);
  const Line branch = points.branch(split);
  const double along_v = std::hypot(points.voltage_spread, line.slope * points.current_spread);
  const double along_i = std::hypot(points.current_spread, branch.slope * points.voltage_spread);
  return line.squares / (along_v * along_v) + branch.squares / (along_i * along_i);
}

std::size_t best_split(const Points& points) {
  std::size_t best = kLeastOnEach;
  double least = std::numeric_limits<double>::infinity();
  for (std::size_t split = kLeastOnEach; split + kLeastOnEach <= points.size(); ++split) {
    const double now = chi_squared(points, split);
    if (now < least) {
      least = now;
      best = split;
    }
  }
  return best;
}

/// Variance that a point has for itself: noise, drift and parts per level.
double own_variance(const Estimate& estimate) {
  return estimate
      .filtered([](const estimate::Source& source) {
        const estimate::Scope scope = estimate::scope_of(source);
        return scope == estimate::Scope::per_level || scope == estimate::Scope::other;
      })
      .variance();
}

Points points_of(std::span<const OutputPoint* const> sorted) {
  Points out;
  double current_variance = 0;
  double voltage_variance = 0;
  double largest_current = 0;
  double largest_voltage = 0;
  for (const OutputPoint* point : sorted) {
    out.current.push_back(point->current.value());
    out.voltage.push_back(point->voltage.value());
    current_variance += own_variance(point->current) / static_cast<double>(sorted.size());
    voltage_variance += own_variance(point->voltage) / static_cast<double>(sorted.size());
    largest_current = std::max(largest_current, point->current.value());
    largest_voltage = std::max(largest_voltage, point->voltage.value());
  }
  const double least = std::numeric_limits<double>::min();
  out.current_spread = std::max({std::sqrt(current_variance), kLeastSpread * largest_current, least});
  out.voltage_spread = std::max({std::sqrt(voltage_variance), kLeastSpread * largest_voltage, least});
  return out;
}

/// By load conductance; a short circuit is last. Products instead of quotients: voltages may be zero.
std::vector<const OutputPoint*> sorted_by_load(std::span<const OutputPoint> points) {
  std::vector<const OutputPoint*> out;
  for (const OutputPoint& point : points) out.push_back(&point);
  const auto conductance = [](const OutputPoint* point) {
    const double voltage = point->voltage.value();
    return voltage > 0 ? point->current.value() / voltage : std::numeric_limits<double>::infinity();
  };
  std::stable_sort(out.begin(), out.end(), [&](const OutputPoint* a, const OutputPoint* b) {
    return conductance(a) < conductance(b);
  });
  return out;
}

/// How far the points after the split lie below the line through the first ones.
struct Fall {
  double greatest = 0;   ///< V
  std::size_t many = 0;  ///< points below by more than noise

  [[nodiscard]] bool matters(const Line& line) const {
    return many > 0 && greatest > kLeastFall * std::abs(line.at_zero);
  }
};

Fall fall_of(const Points& points, std::size_t split, const Line& line) {
  const double freedom = static_cast<double>(split) - 2;
  const double scatter = freedom > 0 ? std::sqrt(line.squares / freedom) : 0;
  const double noise = kDeviations * std::max(scatter, points.voltage_spread);
  Fall out;
  for (std::size_t i = split; i < points.size(); ++i) {
    const double below = line.at(points.current[i]) - points.voltage[i];
    out.greatest = std::max(out.greatest, below);
    if (below > noise) ++out.many;
  }
  return out;
}

/// Partial derivatives of the knee by central differences, the split kept.
struct Slopes {
  std::vector<Knee> by_current, by_voltage;
};

Knee slope_by(Points& points, std::size_t split, double& input, double step) {
  const double before = input;
  input = before + step;
  const auto above = crossing(points.line(split), points.branch(split));
  input = before - step;
  const auto below = crossing(points.line(split), points.branch(split));
  input = before;
  if (!above || !below) return {};
  return {(above->current - below->current) / (2 * step), (above->voltage - below->voltage) / (2 * step)};
}

Slopes slopes_of(Points points, std::size_t split) {
  Slopes out;
  const double current_step = 0.1 * points.current_spread;
  const double voltage_step = 0.1 * points.voltage_spread;
  for (std::size_t i = 0; i < points.size(); ++i) {
    out.by_current.push_back(slope_by(points, split, points.current[i], current_step));
    out.by_voltage.push_back(slope_by(points, split, points.voltage[i], voltage_step));
  }
  return out;
}

/// One line's residuals beyond what the points say of themselves.
struct Excess {
  double variance = 0, degrees_of_freedom = 0;
};

Excess excess(double squares, std::size_t many, double known) {
  if (many < 3) return {};
  const double freedom = static_cast<double>(many) - 2;
  return {std::max(0.0, squares / freedom - known * known), freedom};
}

/// value, with the points' contributions and the scatter about both lines.
Estimate knee_estimate(double Knee::*what, const Knee& knee, std::span<const OutputPoint* const> sorted,
                       const Points& points, std::size_t split, const Slopes& slopes) {
  std::vector<estimate::Partial> partials;
  double of_line = 0;
  double of_branch = 0;
  for (std::size_t i = 0; i < sorted.size(); ++i) {
    partials.push_back({sorted[i]->current, slopes.by_current[i].*what});
    partials.push_back({sorted[i]->voltage, slopes.by_voltage[i].*what});
    const double by = i < split ? slopes.by_voltage[i].*what : slopes.by_current[i].*what;
    (i < split ? of_line : of_branch) += by * by;
  }
  Estimate out = estimate::combine(knee.*what, partials);
  const Line line = points.line(split);
  const Line branch = points.branch(split);
  // Exact points have no spread of their own: the floor is a scale, not a knowledge.
  const double known_v = std::sqrt(own_variance(sorted.front()->voltage));
  const double known_i = std::sqrt(own_variance(sorted.back()->current));
  const Excess on_line = excess(line.squares, split, known_v);
  const Excess on_branch = excess(branch.squares, sorted.size() - split, known_i);
  const std::string label = sorted.front()->label + " to " + sorted.back()->label;
  const auto add = [&](const Excess& scatter, double sum, const std::string& part) {
    if (!(scatter.variance * sum > 0)) return;
    const auto source = estimate::make_type_a(estimate::key::component("fold-back, " + label, part),
                                              "fold-back: " + part, scatter.degrees_of_freedom);
    out = out + Estimate{0, source, std::sqrt(scatter.variance * sum)};
  };
  add(on_line, of_line, "scatter about the regulation line");
  add(on_branch, of_branch, "scatter about the fold branch");
  return out;
}

bool usable(const Estimate& estimate) {
  return std::isfinite(estimate.value()) && std::isfinite(estimate.variance()) && estimate.value() >= 0;
}

void no_knee(FoldBack& out, FoldState state, const std::string& text) {
  out.state = state;
  out.text = text;
  out.knee_current = out.knee_voltage = base::Refusal{"fold-back", text};
}

std::string amperes(double value) {
  return base::print_significant(value, 4) + " A";
}

void single_point(FoldBack& out, const Points& points) {
  no_knee(out, FoldState::too_few_points,
          "the voltage falls away above " + amperes(points.current[points.size() - 2]) +
              ", but a single point lies beyond: take at least two loads after the fold");
}

void none_found(FoldBack& out) {
  no_knee(out, FoldState::none_within_span,
          "no fold-back within the span (up to " + amperes(out.greatest_current_a) + ")");
}

void with_knee(FoldBack& out, const Knee& knee, std::span<const OutputPoint* const> sorted,
               const Points& points, std::size_t split) {
  const Slopes slopes = slopes_of(points, split);
  const Estimate current = knee_estimate(&Knee::current, knee, sorted, points, split, slopes);
  const Estimate voltage = knee_estimate(&Knee::voltage, knee, sorted, points, split, slopes);
  if (!usable(current) || !usable(voltage)) {
    no_knee(out, FoldState::too_few_points, "the two lines meet nowhere near the points");
    return;
  }
  out.state = FoldState::found;
  out.knee_current = current;
  out.knee_voltage = voltage;
  out.on_line = split;
  out.on_branch = sorted.size() - split;
  out.text = "the output leaves its regulation line at " + amperes(knee.current);
  if (out.on_line == kLeastOnEach) {
    out.remarks.emplace_back("two points make the regulation line: its straightness was not tested");
  }
  if (out.on_branch == kLeastOnEach) {
    out.remarks.emplace_back("two points make the fold branch: its straightness was not tested");
  }
}

}  // namespace

base::Outcome<FoldBack> fold_back(std::span<const OutputPoint> points) {
  for (const OutputPoint& point : points) {
    if (!usable(point.current) || !usable(point.voltage)) {
      return base::Refusal{"fold-back, " + point.label,
                           "current and voltage must be finite and not below zero"};
    }
  }
  if (points.size() < 2) return base::Refusal{"fold-back", "fewer than two loads were measured"};
  const std::vector<const OutputPoint*> sorted = sorted_by_load(points);
  const Points plain = points_of(sorted);
  FoldBack out;
  out.greatest_current_a = *std::max_element(plain.current.begin(), plain.current.end());
  const bool enough = sorted.size() >= 2 * kLeastOnEach;
  // Of three points only the last one can lie off a line that the others make.
  const std::size_t split = enough ? best_split(plain) : std::min<std::size_t>(2, sorted.size());
  const Line line = plain.line(split);
  out.line_v = line.at_zero;
  out.line_ohm = -line.slope;
  out.on_line = split;
  const Fall fall = fall_of(plain, split, line);
  if (!fall.matters(line)) {
    none_found(out);
    return out;
  }
  if (!enough || fall.many < kLeastOnEach) {
    single_point(out, plain);
    return out;
  }
  const Line branch = plain.branch(split);
  const auto knee = crossing(line, branch);
  if (!is_branch(line, branch) || !knee) {
    no_knee(out, FoldState::none_within_span,
            "no fold-back within the span: the voltage falls ever faster, but without a knee");
    return out;
  }
  with_knee(out, *knee, sorted, plain, split);
  return out;
}

base::Outcome<TripAgreement> trip_agreement(const Estimate& knee_current_a, const Estimate& expected_a) {
  if (!usable(knee_current_a) || !usable(expected_a)) {
    return base::Refusal{"fold-back", "knee and expected trip must be finite and not below zero"};
  }
  TripAgreement out;
  out.difference = knee_current_a - expected_a;
  out.allowed = estimate::coverage(out.difference).expanded;
  out.agrees = std::abs(out.difference.value()) <= out.allowed;
  const auto with_half_width = [](const Estimate& estimate) {
    return base::print_significant(estimate.value(), 4) + " +- " +
           base::print_significant(estimate::coverage(estimate).expanded, 2) + " A";
  };
  out.text = "knee at " + with_half_width(knee_current_a) + ", expected trip " + with_half_width(expected_a);
  out.text += out.agrees ? ": they agree"
                         : ": they differ by " + base::print_significant(out.difference.value(), 2) +
                               " A, more than the " + base::print_significant(out.allowed, 2) + " A allowed";
  return out;
}

}  // namespace loadstair::efficiency
