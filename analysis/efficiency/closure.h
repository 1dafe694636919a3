// A level visited twice in one run: did the bench come back to where it was?
#pragma once

#include <optional>
#include <string>

#include "analysis/efficiency/curve.h"

namespace loadstair::efficiency {

/// Visits whose output powers lie farther apart than this share are two levels, not one.
inline constexpr double kSameLevel = 0.05;

struct Closure {
  std::string label, again;  ///< of the two visits
  Estimate difference;       ///< efficiency of the second visit less that of the first, ratio
  double moved = 0;          ///< what was taken off for the two powers being unlike, ratio
  double allowed = 0;        ///< half-width of the difference's 95 % interval, ratio
  bool held = false;         ///< |difference| <= allowed
  std::string text;          ///< "closure 0.04 points, the budget allows 0.11"
};

/// What the two visits share drops out of the difference by itself: gains and offsets, also those of this run
/// alone. Left to allow a difference are noise, drift, resolution and the meters' parts per level.
/// slope_per_w  of the efficiency over output power between the neighbouring levels: the repeat is moved to
///              the first visit's power, half of that move counting as its rectangular half-width (the slope
///              is of a chord). nullopt: not moved.
/// Errors:      refused when the powers lie apart by more than 5 %, or a number is not finite.
/// Source:      JCGM 100:2008 5.2 for what cancels; the 5 % common practice, no source.
[[nodiscard]] base::Outcome<Closure> closure(const CurvePoint& first, const CurvePoint& again,
                                             std::optional<double> slope_per_w);

}  // namespace loadstair::efficiency
