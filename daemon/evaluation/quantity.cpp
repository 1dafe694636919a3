#include "daemon/evaluation/quantity.h"

#include <cmath>
#include <utility>

#include "analysis/estimate/coverage.h"

namespace loadstair::evaluation {

Quantity missing(std::string unit, std::string why) {
  Quantity quantity;
  quantity.unit = std::move(unit);
  quantity.why = std::move(why);
  return quantity;
}

Quantity to_quantity(const estimate::Estimate& estimate, std::string unit) {
  const estimate::Coverage coverage = estimate::coverage(estimate);
  if (!std::isfinite(coverage.value) || !std::isfinite(coverage.low) || !std::isfinite(coverage.high)) {
    return missing(std::move(unit), "not a finite number: look at the readings of this step");
  }
  Quantity quantity;
  quantity.known = true;
  quantity.value = coverage.value;
  quantity.unit = std::move(unit);
  quantity.low = coverage.low;
  quantity.high = coverage.high;
  quantity.level = coverage.level;
  const bool linear = coverage.method == estimate::CoverageMethod::linear;
  quantity.method = linear ? "linear" : "monte-carlo";
  if (linear && std::isfinite(coverage.k)) {
    quantity.expanded = coverage.expanded;
    quantity.k = coverage.k;
  }
  return quantity;
}

Quantity to_quantity(const estimate::Quoted& quoted, std::string unit) {
  return quoted ? to_quantity(*quoted, std::move(unit)) : missing(std::move(unit), quoted.refusal().text());
}

Quantity without_uncertainty(double value, std::string unit, std::string why) {
  if (!std::isfinite(value))
    return missing(std::move(unit), "not a finite number: look at the readings of this step");
  Quantity quantity;
  quantity.known = true;
  quantity.value = value;
  quantity.unit = std::move(unit);
  quantity.low = quantity.high = value;
  quantity.uncertainty_known = false;
  quantity.why = std::move(why);
  return quantity;
}

Quantity either(const estimate::Quoted& quoted, const estimate::Quoted& plain, std::string unit,
                const std::string& why) {
  if (quoted || !plain) return to_quantity(quoted, std::move(unit));
  return without_uncertainty(plain->value(), std::move(unit), why.empty() ? quoted.refusal().text() : why);
}

}  // namespace loadstair::evaluation
