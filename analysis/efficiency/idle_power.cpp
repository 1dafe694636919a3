#include "analysis/efficiency/idle_power.h"

#include <cmath>

#include "analysis/base/number.h"
#include "analysis/estimate/coverage.h"

namespace loadstair::efficiency {

IdlePower idle_power(const Quoted& input_power, std::span<const RangeUse> uses) {
  IdlePower out;
  if (!input_power) {
    out.power = input_power.refusal();
    return out;
  }
  if (!std::isfinite(input_power->value()) || !std::isfinite(input_power->variance())) {
    out.power = base::Refusal{"input power", "it is not a finite number"};
    return out;
  }
  out.power = *input_power;
  for (const RangeUse& use : uses) {
    if (!(use.range > 0) || !std::isfinite(use.range) || !std::isfinite(use.reading)) continue;
    const double share = std::abs(use.reading) / use.range;
    if (!(share < kLeastOfRange)) continue;
    out.remarks.push_back(use.channel + ": read at " + base::print_significant(100 * share, 2) +
                          " % of its range, where the meter's offset dominates; a lower range or a zero "
                          "check would narrow this power");
  }
  if (input_power->value() < 0 && estimate::coverage(*input_power).high < 0) {
    out.remarks.emplace_back("the input power is below zero beyond its uncertainty: is a lead reversed?");
  }
  return out;
}

}  // namespace loadstair::efficiency
