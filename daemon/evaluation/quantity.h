// From estimates to the plain numbers of a result. Of this room only.
#pragma once

#include <string>

#include "analysis/estimate/estimate.h"
#include "analysis/settling/settling.h"
#include "daemon/evaluation/result.h"

namespace loadstair::evaluation {

/// A number without one: why.
[[nodiscard]] Quantity missing(std::string unit, std::string why);

/// The estimate with its linear interval. Numbers that are not finite become a refusal.
[[nodiscard]] Quantity to_quantity(const estimate::Estimate& estimate, std::string unit);
[[nodiscard]] Quantity to_quantity(const estimate::Quoted& quoted, std::string unit);

/// A value of whose error nothing is known.
[[nodiscard]] Quantity without_uncertainty(double value, std::string unit, std::string why);

/// The estimate where there is one; else the plain value that was found by leaving unknown uncertainties out.
/// why   what is not known
[[nodiscard]] Quantity either(const estimate::Quoted& quoted, const estimate::Quoted& plain, std::string unit,
                              const std::string& why);

}  // namespace loadstair::evaluation
