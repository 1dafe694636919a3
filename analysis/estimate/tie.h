// Checks of the bench that replace a specification: two meters tied to each other, and a measured zero.
#pragma once

#include <string>

#include "analysis/estimate/meter.h"

namespace loadstair::estimate {

/// What two meters showed of one quantity at one level (voltmeters in parallel, ammeters in series). Both
/// readings with their meters' errors (with_meter_error(), the occasion naming the run and the tie's level)
/// plus the Type A of their windows: the cancelling is left to the sources.
struct TieLevel {
  Estimate a;
  Estimate b;
};

/// Readings of a tie level from the Type A estimates of its two windows: each with its meter's error added.
/// level    names the level within the run ("tie low"), unlike any step's
/// Errors:  as with_meter_error().
[[nodiscard]] base::Outcome<TieLevel> tie_level(const TieLevel& type_a, const MeterRange& meter_a,
                                                const MeterRange& meter_b, const Occasion& level,
                                                const Shares& shares_a = {}, const Shares& shares_b = {});

/// Meter B held against meter A: b = ratio x a + offset.
struct Tie {
  /// (b_high - b_low)/(a_high - a_low) and b_low - ratio x a_low, with every source of both meters: for
  /// arithmetic, in which B's errors cancel.
  Estimate ratio;
  Estimate offset;
  /// The same as measurement results: how B differs from A as found. Gains and offsets of the meters are what
  /// was measured, so only Type A, linearity and resolution are left as their uncertainty.
  Estimate gain_difference;  ///< ratio - 1
  Estimate offset_difference;
  double low = 0;  ///< span of the levels on B's scale
  double high = 0;
  /// Whether the gain and the offset differ by no more than the specifications of both meters allow (95 %).
  bool within_specifications = true;
};

/// Errors: refused when a reading is not finite, or the two levels are too near to each other: the ratio's
/// measured standard uncertainty above 10 % of it, or no distance at all.
[[nodiscard]] base::Outcome<Tie> tie_check(const TieLevel& one, const TieLevel& other);

/// A reading of B as A would have shown it: (b - offset)/ratio. B's gain and offset drop out as far as they
/// are the same sources as in the tie; A's take their place, scaled to the reading, so that they cancel
/// against A's own reading in a ratio. What stays: Type A of the tie, linearity and resolution of both meters
/// at the tie's levels and of B at this reading, and, when the tie was made in another run, both meters'
/// parts per run. Outside the span of the tie's levels these grow with the distance.
/// Only the ratio of the meters is learned: a quantity that B alone measures is then as uncertain as A.
/// reading_b  B's reading with B's error, on the range on which it was tied
/// Source:    JCGM 100:2008 5.2 (correlated inputs through common sources).
[[nodiscard]] Estimate tied(const Estimate& reading_b, const Tie& tie);

/// The source was off and the inputs shorted (current probes zeroed): what the meter showed before and after.
/// Means of windows with their Type A alone, without the meter's specification.
struct ZeroCheck {
  Estimate before;
  Estimate after;
};

/// A reading corrected by the mean of both zeros. The offset of its specification (fixed and per run) is
/// replaced by the zeros' Type A, half their change as a rectangular source common to the run, and the
/// resolution: once for the zeros, and once for the reading where the specification's digits stood for it.
/// Gain and linearity stay.
/// reading  as with_meter_error() gave it for that meter and occasion
/// Errors:  refused when a value is not finite.
/// Source:  JCGM 100:2008 3.2.3-3.2.4 (corrections), 4.3.7, F.2.2.1.
[[nodiscard]] Quoted zero_corrected(const Estimate& reading, const ZeroCheck& zero, const MeterRange& meter,
                                    const Occasion& occasion);

}  // namespace loadstair::estimate
