// Where an overload circuit takes the output off its regulation line, and whether that is where its
// threshold and its sense resistor say.
#pragma once

#include <span>
#include <string>
#include <vector>

#include "analysis/efficiency/port.h"
#include "analysis/efficiency/trade.h"

namespace loadstair::efficiency {

/// The output at one load: a steady step, or one reading of a slow sweep. RMS values on AC.
struct OutputPoint {
  std::string label;
  Estimate current;  ///< A, zero or more
  Estimate voltage;  ///< V, zero or more
};

enum class FoldState {
  found,
  none_within_span,  ///< all points lie on one regulation line
  too_few_points,    ///< the voltage falls away, but the points do not say where
};

/// The last voltage must lie below the regulation line by this share of it, and by four standard deviations.
inline constexpr double kLeastFall = 0.01;
/// The branch must be this much steeper than the regulation line. Both common practice, no source.
inline constexpr double kSteeper = 5;

struct FoldBack {
  FoldState state = FoldState::none_within_span;
  Quoted knee_current = base::Refusal{};  ///< A; refused unless found, with the reason
  Quoted knee_voltage = base::Refusal{};  ///< V
  double line_v = 0;                      ///< regulation line: voltage without current,
  double line_ohm = 0;                    ///< and its fall, V/A
  std::size_t on_line = 0;                ///< points that it was fitted to
  std::size_t on_branch = 0;              ///< and those of the other branch
  double greatest_current_a = 0;
  std::string text;                  ///< the state in words
  std::vector<std::string> remarks;  ///< of a found knee: what was not tested
};

/// The points are sorted by load conductance I/V, which rises along a regulation line, a constant-current and
/// a fold-back branch alike. V = a + b I is fitted to the first ones and I = c + d V to the others, for every
/// place where the two may meet; the one with the least sum of squares, each residual over the spread that
/// the points do not share, is taken. The knee is where the two lines cross. Its contributions go through
/// both fits by the chain rule, so that a gain which all points share moves the knee as a whole; scatter of
/// the points beyond their own unshared uncertainty is added as Type A.
/// points   in any order, at least four for a knee: two on each line
/// Errors:  refused for numbers that are not finite or below zero, and for fewer than two points.
/// Cost:    about the square of the number of points; 500 take some ten milliseconds.
/// Source:  two-phase regression (Hinkley 1971, from memory); JCGM 100:2008 5.2 for the uncertainty.
[[nodiscard]] base::Outcome<FoldBack> fold_back(std::span<const OutputPoint> points);

/// The knee held against the expected trip.
struct TripAgreement {
  Estimate difference;  ///< knee less expected, A
  double allowed = 0;   ///< half-width of its 95 % interval, A
  bool agrees = false;
  std::string text;  ///< for a person
};

/// expected  of trip_current(), with the tolerances of threshold and resistor
[[nodiscard]] base::Outcome<TripAgreement> trip_agreement(const Estimate& knee_current_a,
                                                          const Estimate& expected_a);

}  // namespace loadstair::efficiency
