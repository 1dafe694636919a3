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

/// Source: JCGM 100:2008 7.2.7 (what a budget states); H.1 table H.1 (its form).
[[nodiscard]] Budget budget(const Estimate& a);

}  // namespace loadstair::estimate
