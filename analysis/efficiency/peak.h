// Where a loss model's efficiency is greatest, and how great it is there.
#pragma once

#include <cstddef>
#include <string>
#include <vector>

#include "analysis/efficiency/loss_model.h"
#include "analysis/estimate/coverage.h"
#include "analysis/estimate/monte_carlo.h"

namespace loadstair::efficiency {

/// p0 and p2 must be above zero in this share of the draws: else there may be no peak at all.
inline constexpr double kLeastWithPeak = 0.975;

struct Peak {
  /// Linear, with their sources; their own linear intervals are not to be quoted for the power.
  Estimate power;                          ///< sqrt(p0 / p2), W
  Estimate efficiency;                     ///< 1 / (1 + p1 + 2 sqrt(p0 p2))
  estimate::Coverage power_interval;       ///< probabilistically symmetric, by Monte Carlo
  estimate::Coverage efficiency_interval;  ///< the same
  double with_peak = 0;                    ///< share of the draws that had one
  std::vector<std::string> remarks;        ///< an interval that reaches beyond the measured span
};

/// The peak by draws of the model's coefficients with all their sources. Draws without a peak count at the
/// end where they belong: without constant loss the peak lies at no power, without quadratic loss at a great
/// one; their efficiency is the greatest within the measured span. The interval has as much probability below
/// as above, which needs no finite tail. Errors:  refused as LossModel::peak_power(); when fewer than 97.5 %
/// of the draws have p0 and p2 above zero;
///          and as estimate::propagate().
/// Cost:    two propagations.
/// Source:  JCGM 101:2008 7.2-7.7, 7.7.2 (symmetric interval).
[[nodiscard]] base::Outcome<Peak> peak_of(const LossModel& model, std::size_t draws = 100'000,
                                          std::uint64_t seed = estimate::kMonteCarloSeed);

}  // namespace loadstair::efficiency
