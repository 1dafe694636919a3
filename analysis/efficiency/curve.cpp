#include "analysis/efficiency/curve.h"

#include <algorithm>
#include <utility>

namespace loadstair::efficiency {

std::vector<CurvePoint> curve(std::span<const StepResult> steps) {
  std::vector<CurvePoint> out;
  for (const StepResult& step : steps) {
    if (!step.efficiency || !step.input_power || !step.output_power || !step.loss) continue;
    CurvePoint point{step.label, *step.input_power, *step.output_power, *step.loss, *step.efficiency};
    if (is_finite(point)) out.push_back(std::move(point));
  }
  std::stable_sort(out.begin(), out.end(), [](const CurvePoint& a, const CurvePoint& b) {
    return a.output_power.value() < b.output_power.value();
  });
  return out;
}

bool is_finite(const CurvePoint& point) {
  return is_finite(point.input_power) && is_finite(point.output_power) && is_finite(point.loss) &&
         is_finite(point.efficiency);
}

}  // namespace loadstair::efficiency
