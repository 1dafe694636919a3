// A run's steps as a curve over output power.
#pragma once

#include <span>
#include <string>
#include <vector>

#include "analysis/efficiency/step.h"

namespace loadstair::efficiency {

/// One measured level.
struct CurvePoint {
  std::string label;
  Estimate input_power;   ///< W
  Estimate output_power;  ///< W
  Estimate loss;          ///< W
  Estimate efficiency;    ///< ratio
  /// Which piece of the curve it lies on: what a fan, a burst mode or a meter's range makes a curve of its
  /// own. Levels of one name are one piece; all empty: one curve.
  std::string segment{};
};

/// The steps that have an efficiency, by rising output power. Steps without one are left out, and those with
/// a number that is not finite.
[[nodiscard]] std::vector<CurvePoint> curve(std::span<const StepResult> steps);

/// Output power, loss, input power and efficiency are finite numbers, and so are their uncertainties.
[[nodiscard]] bool is_finite(const CurvePoint& point);

}  // namespace loadstair::efficiency
