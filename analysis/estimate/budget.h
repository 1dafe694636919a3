// Budgets: which source contributes how much to one estimate, and what would shrink it.
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "analysis/estimate/coverage.h"
#include "analysis/estimate/estimate.h"

namespace loadstair::estimate {

/// One line: all sources of one name.
struct BudgetLine {
  std::string name;
  Kind kind = Kind::type_b;
  Owner owner;
  double standard_uncertainty = 0;         ///< root sum of squares of the contributions, unit of the estimate
  double contribution = 0;                 ///< signed, of its largest source: the direction in which it acts
  double share = 0;                        ///< of the variance, 0 to 1; shares sum to 1
  std::string action;                      ///< what would shrink it; empty where nothing is known
  std::optional<double> expanded_if_done;  ///< U of the estimate recomputed as if the action had been taken
};

struct Budget {
  Coverage coverage;
  std::vector<BudgetLine> lines;  ///< largest share first, then by name
};

/// What an action is taken to do, each on its own:
///   tie check           where another meter of that function, on a range within a factor of 5, acts the
///   other way (the ratio is what counts):
///                       made in the same run, both meters' gains go, fixed and per run, and one more
///                       linearity error of each comes, from the tie's level; its own noise is not counted.
///                       Without such a partner: tied to a much better meter, the fixed part goes.
///   zero check          the offset goes, fixed and per run
///   longer window       variance_left of the variance; the degrees of freedom grow as the readings do
///   all others          variance_left of the variance of every source of the line
/// Source: JCGM 100:2008 7.2.7 (what a budget states); H.1 table H.1 (its form).
[[nodiscard]] Budget budget(const Estimate& a);

}  // namespace loadstair::estimate
