#include "analysis/efficiency/curve.h"

#include <algorithm>

namespace loadstair::efficiency {

std::vector<CurvePoint> curve(std::span<const StepResult> steps) {
  std::vector<CurvePoint> out;
  for (const StepResult& step : steps) {
    if (!step.efficiency || !step.input_power || !step.output_power || !step.loss) continue;
    out.push_back({step.label, *step.input_power, *step.output_power, *step.loss, *step.efficiency});
  }
  std::stable_sort(out.begin(), out.end(), [](const CurvePoint& a, const CurvePoint& b) {
    return a.output_power.value() < b.output_power.value();
  });
  return out;
}

}  // namespace loadstair::efficiency
