// What a stair would give on a bench, before power is on: one code path with the results of a run.
#pragma once

#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "daemon/evaluation/result.h"
#include "daemon/setup/hookup.h"
#include "daemon/setup/stair.h"

namespace loadstair::evaluation {

/// The one thing that would help a result most.
struct BestAction {
  std::string source, action;
  double expanded_if_done = 0.0;  ///< in the unit of the result
};

struct ForecastStep {
  std::string label;
  std::string kind;                                      ///< setup::name_of(StepKind)
  std::string result_state;                              ///< "measured", "apparent power only", ...
  Quantity input_power, output_power, efficiency, loss;  ///< as far as the files tell; W, 1
  std::vector<BudgetEntry> budget, loss_budget;          ///< of efficiency and loss, largest share first
  std::optional<BestAction> best, best_for_loss;         ///< none: nothing in the budget says what to do
  std::vector<std::string> remarks;
};

struct Forecast {
  std::vector<ForecastStep> steps;   ///< levels, no load and standby; zeros and ties are in their figures
  std::vector<std::string> remarks;  ///< of the whole, each once
  std::vector<std::string> bench_checks;  ///< what zeros and ties would bring, or why they would not be used
};

/// An ideal run (readings as the plan says, rounded to their last digits, no noise) is made and evaluated:
/// what is left is what the specifications, the wiring and the sensors allow. Noise comes on top. hookup,
/// stair   that match() found to fit at_ns           when the run would be, UTC ns since 1970: ages of
/// calibrations. 0: not judged by their date Cost: as evaluate(), twice.
[[nodiscard]] Forecast forecast(const setup::Hookup& hookup, const setup::Stair& stair,
                                std::int64_t at_ns = 0);

}  // namespace loadstair::evaluation
