// limits: is a result inside its limits, and what the limits of published tables are. Decisions with a guard
// band, tables of harmonic and injection limits, limits of a user's own. Not for how a result was measured.
#pragma once

#include <cstddef>
#include <optional>
#include <span>
#include <string>
#include <string_view>

#include "analysis/base/outcome.h"
#include "analysis/estimate/coverage.h"

namespace loadstair::limits {

enum class Verdict { pass, fail, undecided };

[[nodiscard]] std::string_view word_of(Verdict verdict);

/// What is allowed, in the unit of the result; at least one end.
struct Tolerance {
  std::optional<double> low;
  std::optional<double> high;
};

/// One per report.
struct Rule {
  /// r: the guard band is r times the expanded uncertainty. 1: guarded acceptance. 0: simple acceptance, only
  /// where a table's own document prescribes it.
  double guard_factor = 1;
};

struct Decision {
  Verdict verdict = Verdict::undecided;
  Tolerance tolerance;
  double value = 0;
  double guard_factor = 1;
  /// Where a result passes: the tolerance narrowed by the guard band. An interval turned inside out (low
  /// above high) accepts nothing.
  Tolerance acceptance;
  /// Probability that the quantity is inside the tolerance, from the result's own distribution.
  double conforming_probability = 0;
  bool indicative = false;  ///< the record is shorter than the table asks for
  std::string text;         ///< for a person, with numbers and unit
};

/// Pass inside the guarded acceptance interval (ends included), fail beyond the guarded rejection limits,
/// else undecided. Towards an upper limit a result passes when its interval, stretched r times about the
/// value, ends below it; it fails when the stretched interval begins above it. With r = 0 the value alone
/// decides. An interval by Monte Carlo has no U: its own two sides take its place. result   with its coverage
/// interval unit     for the text draws    of the result by Monte Carlo, in any order; where given, the
/// probability is the share of draws
///          inside. Else Student's t with the result's degrees of freedom (normal where infinite).
/// Errors:  refused when no limit is given, low is above high, a number is not finite, or r is below zero.
/// Source:  JCGM 106:2012 7 (conformance probability), 8.3 (guard bands, w = r U); ILAC-G8:09/2019 4.2 (the
///          three statements).
[[nodiscard]] base::Outcome<Decision> decide(const estimate::Coverage& result, const Tolerance& tolerance,
                                             std::string_view unit, const Rule& rule = {},
                                             std::span<const double> draws = {});

/// Probability that a quantity with that result lies within the tolerance; as in decide().
[[nodiscard]] double conforming_probability(const estimate::Coverage& result, const Tolerance& tolerance,
                                            std::span<const double> draws = {});

/// A result of which only a lower bound is known (a clipped peak): beyond an upper limit it fails, it never
/// passes one. Errors: as decide().
[[nodiscard]] base::Outcome<Decision> decide_lower_bound(double at_least, const Tolerance& tolerance,
                                                         std::string_view unit);

/// A limit of the user's own, from the stair file.
struct Limit {
  std::string quantity;  ///< as the results name it ("efficiency", "THD of output voltage")
  std::optional<double> low;
  std::optional<double> high;
  std::string unit;
};

[[nodiscard]] base::Outcome<Decision> decide(const Limit& limit, const estimate::Coverage& result,
                                             const Rule& rule = {}, std::span<const double> draws = {});

}  // namespace loadstair::limits
