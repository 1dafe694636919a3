#include "analysis/efficiency/closure.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "analysis/base/number.h"
#include "analysis/estimate/coverage.h"

namespace loadstair::efficiency {
namespace {

std::string points_text(double ratio) {
  return base::print_fixed(std::abs(ratio) * 100, std::abs(ratio) < 1e-4 ? 4 : 2);
}

}  // namespace

base::Outcome<Closure> closure(const CurvePoint& first, const CurvePoint& again,
                               std::optional<double> slope_per_w) {
  const std::string place = first.label + " and " + again.label;
  const double power_w = first.output_power.value();
  const double apart_w = again.output_power.value() - power_w;
  const Estimate plain = again.efficiency - first.efficiency;
  const double move = slope_per_w ? -*slope_per_w * apart_w : 0.0;
  if (!std::isfinite(apart_w) || !std::isfinite(plain.value()) || !std::isfinite(plain.variance()) ||
      !std::isfinite(move)) {
    return base::Refusal{place, "a number is not finite"};
  }
  if (std::abs(apart_w) > kSameLevel * std::abs(power_w)) {
    return base::Refusal{place, "the output powers lie apart by " +
                                    base::print_significant(std::abs(apart_w), 3) +
                                    " W, more than 5 %: this is not the same level again"};
  }
  Closure out;
  out.label = first.label;
  out.again = again.label;
  out.moved = move;
  out.difference = plain + move;
  if (move != 0.0) {
    const auto source =
        estimate::make_type_b(estimate::key::component("closure of " + again.label, "move to one power"),
                              "closure: move to one power", estimate::Distribution::rectangular);
    out.difference = out.difference + Estimate{0, source, std::abs(move) / 2 / std::numbers::sqrt3};
  }
  out.allowed = estimate::coverage(out.difference).expanded;
  out.held = std::abs(out.difference.value()) <= out.allowed;
  out.text = "closure " + points_text(out.difference.value()) + " points, the budget allows " +
             points_text(out.allowed);
  if (!out.held) out.text += ": more than noise and drift explain; something changed during the run";
  return out;
}

}  // namespace loadstair::efficiency
