// Loss against output power: p0 + p1 P + p2 P^2, with uncertainties through the linear estimator.
#pragma once

#include <optional>
#include <span>
#include <string>

#include "analysis/efficiency/curve.h"

namespace loadstair::efficiency {

/// A fitted loss model. Coefficients share the sources of the levels, so that what is computed from them has
/// the right covariances.
struct LossModel {
  Estimate p0;         ///< W
  Estimate p1;         ///< W/W
  Estimate p2;         ///< W/W^2
  double least_w = 0;  ///< measured span of output power
  double greatest_w = 0;
  double chi_squared = 0;
  double degrees_of_freedom = 0;    ///< levels minus 3
  bool lack_of_fit_tested = false;  ///< with five levels or more
  bool lack_of_fit = false;         ///< chi_squared beyond its 95 % point: model figures are not to be quoted
  std::string lack_of_fit_text;     ///< "not tested (4 levels)", "not significant", "significant: ..."

  /// Loss at an output power, W.
  [[nodiscard]] Estimate loss_at(double output_power_w) const;
  /// d loss / d P there.
  [[nodiscard]] Estimate slope_at(double output_power_w) const;
  /// P / (P + loss): ratio. Precondition: output_power_w > 0.
  [[nodiscard]] Estimate efficiency_at(double output_power_w) const;
  /// sqrt(p0/p2), where p0 and p2 are above zero and it lies in the span; refused with the reason otherwise.
  [[nodiscard]] Quoted peak_power() const;
};

/// Weighted least squares. Weights come from the part of each level's loss that is its own alone (sources
/// that no other level has), floored by (floor_w)^2: shared errors must not steer the fit (Peelle's puzzle;
/// D'Agostini 1994). points   at least three, at different powers floor_w  standard uncertainty that no
/// level's own part falls below, W: q / sqrt 12 of the power's resolution; above 0 Errors:  refused for fewer
/// than three levels, levels that coincide, or a floor that is not above zero. Source:  D'Agostini 1994,
/// Nucl. Instrum. Meth. A 346, 306; JCGM 100:2008 H.3 for the linear estimator.
[[nodiscard]] base::Outcome<LossModel> fit_loss_model(std::span<const CurvePoint> points, double floor_w);

}  // namespace loadstair::efficiency
