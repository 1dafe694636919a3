// What a source of error is common to, and the shares of a variance that are common.
#pragma once

#include <span>
#include <string_view>

#include "analysis/estimate/meter.h"

namespace loadstair::estimate {

/// fixed: wherever the meter (or part) is used on that range; per_run: one run; per_level: one channel in one
/// step; other: noise, drift, alignment of one window, and what has no key of this program.
enum class Scope { fixed, per_run, per_level, other };

/// Read off the key (source.h): meter/..., component/..., window/....
[[nodiscard]] Scope scope_of(const Source& source);

/// Which error of a meter a source is: "gain", "offset", "linearity", "resolution", ...; empty where it is
/// none of a meter's.
[[nodiscard]] std::string_view meter_part_of(const Source& source);

/// Shares of an estimate's variance; they sum to 1, or are all zero for an exact estimate.
struct ScopeShares {
  double fixed = 0;
  double per_run = 0;
  double per_level = 0;
  double other = 0;

  /// What two runs do not have in common even with the same meters on the same ranges.
  [[nodiscard]] double unshared() const { return per_run + per_level + other; }
};

[[nodiscard]] ScopeShares scope_shares(const Estimate& a);

/// Shares from a declared short-term figure (24-hour specification, repeatability) at a reading: the unshared
/// share of the variance is that of the short-term limits over that of the full ones, at most 1, half of it
/// per run and half per level (common practice, no source).
/// meter    with its full accuracy; short_term: limits of the same form, same range, its own distribution
/// Errors:  refused as with_meter_error(), for either specification; and when the full one is zero there.
[[nodiscard]] base::Outcome<Shares> shares_from_repeatability(double reading, const MeterRange& meter,
                                                              const AccuracySpec& short_term);

/// Shares from tie checks of the same two meters in several runs: the variance of the measured ratio between
/// runs over the variance that both specifications give to it is the per-run share, at most 1 - per_level;
/// per_level stays as given. The standard deviation of few ties is taken at its upper 84 % bound (one
/// standard uncertainty of it), s^2 nu / chi^2_0.16(nu).
/// relative_differences  one per run: relative gain difference of B to A (tie.h), at least three
/// relative_u_a, _b      relative standard uncertainties of the gains by their specifications; not both zero
/// Errors:  refused for fewer than three ties, numbers that are not finite, no specification.
[[nodiscard]] base::Outcome<Shares> shares_from_ties(std::span<const double> relative_differences,
                                                     double relative_u_a, double relative_u_b,
                                                     const Shares& otherwise = {});

/// The fixed share counted as new for this run: another range of temperature, an adjustment in between.
[[nodiscard]] Shares without_fixed(const Shares& shares);

}  // namespace loadstair::estimate
