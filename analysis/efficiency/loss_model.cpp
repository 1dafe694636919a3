#include "analysis/efficiency/loss_model.h"

#include <gsl/gsl_cdf.h>

#include <array>
#include <cmath>
#include <utility>
#include <vector>

#include "analysis/base/number.h"
#include "analysis/base/require.h"
#include "analysis/estimate/coverage.h"

namespace loadstair::efficiency {

namespace {

using Vector = std::array<double, 3>;
using Matrix = std::array<Vector, 3>;

constexpr std::size_t kLeastForLackOfFit = 5;

/// Inverse of a symmetric positive definite 3 x 3 matrix by cofactors; nullopt when it is singular.
std::optional<Matrix> inverse(const Matrix& m) {
  const auto minor_of = [&m](std::size_t r, std::size_t c) {
    const std::size_t r1 = r == 0 ? 1 : 0;
    const std::size_t r2 = r == 2 ? 1 : 2;
    const std::size_t c1 = c == 0 ? 1 : 0;
    const std::size_t c2 = c == 2 ? 1 : 2;
    return m[r1][c1] * m[r2][c2] - m[r1][c2] * m[r2][c1];
  };
  const double determinant = m[0][0] * minor_of(0, 0) - m[0][1] * minor_of(0, 1) + m[0][2] * minor_of(0, 2);
  if (!(determinant > 1e-12 * m[0][0] * m[1][1] * m[2][2])) return std::nullopt;
  Matrix out{};
  for (std::size_t r = 0; r < 3; ++r) {
    for (std::size_t c = 0; c < 3; ++c) {
      out[r][c] = ((r + c) % 2 == 0 ? 1 : -1) * minor_of(c, r) / determinant;
    }
  }
  return out;
}

Vector times(const Matrix& m, const Vector& v) {
  Vector out{};
  for (std::size_t r = 0; r < 3; ++r) out[r] = m[r][0] * v[0] + m[r][1] * v[1] + m[r][2] * v[2];
  return out;
}

double dot(const Vector& a, const Vector& b) {
  return a[0] * b[0] + a[1] * b[1] + a[2] * b[2];
}

/// Variance of a level's loss that no other level shares.
double own_variance(std::span<const CurvePoint> points, std::size_t which) {
  double out = 0;
  for (const estimate::Term& term : points[which].loss.terms()) {
    // What another level's loss would get from this source alone.
    const Estimate alone{0, term.source, 1};
    bool shared = false;
    for (std::size_t i = 0; i < points.size() && !shared; ++i) {
      shared = i != which && estimate::covariance(points[i].loss, alone) != 0;
    }
    if (!shared) out += term.contribution * term.contribution;
  }
  return out;
}

struct Design {
  double scale_w = 0;       ///< powers are divided by it
  std::vector<Vector> row;  ///< 1, x, x^2
  std::vector<double> weight;
  Matrix inverse_normal{};
  Vector coefficient{};
};

std::optional<Design> solve(std::span<const CurvePoint> points, double floor_w) {
  Design design;
  for (const CurvePoint& point : points)
    design.scale_w = std::max(design.scale_w, std::abs(point.output_power.value()));
  if (!(design.scale_w > 0)) return std::nullopt;
  Matrix normal{};
  Vector right{};
  for (std::size_t i = 0; i < points.size(); ++i) {
    const double x = points[i].output_power.value() / design.scale_w;
    design.row.push_back({1, x, x * x});
    design.weight.push_back(1 / (own_variance(points, i) + floor_w * floor_w));
    for (std::size_t r = 0; r < 3; ++r) {
      for (std::size_t c = 0; c < 3; ++c)
        normal[r][c] += design.weight[i] * design.row[i][r] * design.row[i][c];
      right[r] += design.weight[i] * design.row[i][r] * points[i].loss.value();
    }
  }
  const auto inverted = inverse(normal);
  if (!inverted) return std::nullopt;
  design.inverse_normal = *inverted;
  design.coefficient = times(design.inverse_normal, right);
  return design;
}

/// Coefficients as estimates: derivatives of the weighted least-squares solution with respect to every loss
/// and power.
std::array<Estimate, 3> coefficients_of(std::span<const CurvePoint> points, const Design& design) {
  std::array<std::vector<estimate::Partial>, 3> partials;
  const Vector& c = design.coefficient;
  for (std::size_t i = 0; i < points.size(); ++i) {
    const Vector& row = design.row[i];
    const double weight = design.weight[i];
    const double residual = points[i].loss.value() - dot(row, c);
    const Vector d_row{0, 1 / design.scale_w, 2 * row[1] / design.scale_w};
    Vector by_loss{};
    Vector by_power{};
    for (std::size_t r = 0; r < 3; ++r) {
      by_loss[r] = weight * row[r];
      by_power[r] = weight * (d_row[r] * residual - row[r] * dot(d_row, c));
    }
    by_loss = times(design.inverse_normal, by_loss);
    by_power = times(design.inverse_normal, by_power);
    for (std::size_t r = 0; r < 3; ++r) {
      partials[r].push_back({points[i].loss, by_loss[r]});
      partials[r].push_back({points[i].output_power, by_power[r]});
    }
  }
  std::array<Estimate, 3> out;
  double unscale = 1;
  for (std::size_t r = 0; r < 3; ++r) {
    out[r] = estimate::combine(c[r], partials[r]) * unscale;
    unscale /= design.scale_w;
  }
  return out;
}

void test_fit(LossModel& model, std::size_t levels) {
  model.degrees_of_freedom = static_cast<double>(levels) - 3;
  const std::string count = base::print_integer(static_cast<std::int64_t>(levels));
  if (levels < kLeastForLackOfFit) {
    model.lack_of_fit_text = "not tested (" + count + " levels)";
    return;
  }
  model.lack_of_fit_tested = true;
  const double limit = gsl_cdf_chisq_Qinv(1 - estimate::kLevel, model.degrees_of_freedom);
  model.lack_of_fit = model.chi_squared > limit;
  model.lack_of_fit_text = std::string{model.lack_of_fit ? "significant" : "not significant"} +
                           ": chi-squared " + base::print_significant(model.chi_squared, 3) + " against " +
                           base::print_significant(limit, 3) + " (" + count + " levels)";
}

}  // namespace

Estimate LossModel::loss_at(double output_power_w) const {
  const double p = output_power_w;
  return estimate::combine(p0.value() + p * (p1.value() + p * p2.value()), {{p0, 1}, {p1, p}, {p2, p * p}});
}

Estimate LossModel::slope_at(double output_power_w) const {
  return estimate::linear(p1.value() + 2 * output_power_w * p2.value(), p1, 1, p2, 2 * output_power_w);
}

Estimate LossModel::efficiency_at(double output_power_w) const {
  base::require(output_power_w > 0, "a model's efficiency is asked above zero power");
  return output_power_w / (output_power_w + loss_at(output_power_w));
}

Quoted LossModel::peak_power() const {
  if (lack_of_fit) return base::Refusal{"peak efficiency", "lack of fit: " + lack_of_fit_text};
  if (!(p0.value() > 0) || !(p2.value() > 0)) {
    return base::Refusal{"peak efficiency", "the model has no peak: p0 and p2 are not both above zero"};
  }
  Estimate peak = estimate::square_root(p0 / p2);
  if (peak.value() < least_w || peak.value() > greatest_w) {
    return base::Refusal{"peak efficiency", "it would lie at " + base::print_significant(peak.value(), 3) +
                                                " W, outside the measured " +
                                                base::print_significant(least_w, 3) + " to " +
                                                base::print_significant(greatest_w, 3) + " W"};
  }
  return peak;
}

base::Outcome<LossModel> fit_loss_model(std::span<const CurvePoint> points, double floor_w) {
  for (const CurvePoint& point : points) {
    if (!is_finite(point))
      return base::Refusal{"loss model", "a number of " + point.label + " is not finite"};
  }
  if (points.size() < 3) {
    return base::Refusal{"loss model", "needs at least three levels, got " +
                                           base::print_integer(static_cast<std::int64_t>(points.size()))};
  }
  if (!(floor_w > 0) || !std::isfinite(floor_w))
    return base::Refusal{"loss model", "the floor of the levels' own uncertainty must be above zero"};
  const auto design = solve(points, floor_w);
  if (!design)
    return base::Refusal{"loss model", "the levels lie too near to each other for three coefficients"};
  LossModel model;
  auto coefficients = coefficients_of(points, *design);
  model.p0 = std::move(coefficients[0]);
  model.p1 = std::move(coefficients[1]);
  model.p2 = std::move(coefficients[2]);
  model.least_w = points.front().output_power.value();
  model.greatest_w = model.least_w;
  for (std::size_t i = 0; i < points.size(); ++i) {
    const double power = points[i].output_power.value();
    model.least_w = std::min(model.least_w, power);
    model.greatest_w = std::max(model.greatest_w, power);
    const double residual = points[i].loss.value() - dot(design->row[i], design->coefficient);
    model.chi_squared += design->weight[i] * residual * residual;
  }
  if (!is_finite(model.p0) || !is_finite(model.p1) || !is_finite(model.p2) ||
      !std::isfinite(model.chi_squared))
    return base::Refusal{"loss model", "the levels' numbers are too large for a fit"};
  test_fit(model, points.size());
  return model;
}

}  // namespace loadstair::efficiency
