// The end of one exponential approach from three readings at equal distances in time: for temperatures that
// are typed. Not for series (settling.h fits them).
#pragma once

#include "analysis/base/outcome.h"
#include "analysis/estimate/estimate.h"

namespace loadstair::settling {

struct ThreePointEnd {
  estimate::Estimate end;    ///< (b^2 - a c)/(2 b - a - c), unit of the readings
  estimate::Estimate tau_s;  ///< h/ln((b - a)/(c - b))
};

/// first, second, third   readings, oldest first
/// spacing_s              between neighbours, s, > 0
/// Exact for one constant and a steady room; a second, slower constant is not seen. Refused where the second
/// change is not smaller than the first and of the same sign: no approach can be told.
/// Source: closed form of one exponential (common practice; from memory in several standards on heating
/// tests).
[[nodiscard]] base::Outcome<ThreePointEnd> three_point_end(const estimate::Estimate& first,
                                                           const estimate::Estimate& second,
                                                           const estimate::Estimate& third, double spacing_s);

}  // namespace loadstair::settling
