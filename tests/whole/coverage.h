// Does the 95 % interval of a step's efficiency hold the plant's truth as often as it says, without being
// inflated? Every seed is another bench whose errors are drawn by code that shares nothing with analysis; one
// step is counted per seed, the levels in turn, so that the draws are independent.
#pragma once

#include <cstdint>
#include <string>
#include <vector>

#include "whole/virtual_bench.h"

namespace loadstair::whole {

struct CoveragePoint {
  std::uint64_t seed = 0;
  std::string label;
  bool known = false;  ///< the step has an efficiency
  double truth = 0.0, value = 0.0, low = 0.0, high = 0.0;
  double implied_half_width = 0.0;  ///< without noise, from the declared specifications alone
  [[nodiscard]] bool holds() const { return known && low <= truth && truth <= high; }
  [[nodiscard]] double width_ratio() const { return (high - low) / 2.0 / implied_half_width; }
};

/// The half-width that the declared specifications imply for efficiency at a true operating point: 1.96 times
/// the root of the sum of squares of rectangular standard uncertainties (JCGM 100:2008 4.3.7), computed here
/// from the hook-up file's figures and nothing of analysis. For one dc input (volts times amperes) and one
/// output wattmeter.
[[nodiscard]] double implied_half_width(const setup::Hookup& hookup, const setup::Stair& stair,
                                        const rehearsal::Truth& truth);

/// Runs `seeds` benches from `first` on.
[[nodiscard]] std::vector<CoveragePoint> cover(const setup::Hookup& hookup, const setup::Stair& stair,
                                               std::uint64_t first, std::uint64_t seeds);

struct CoverageSummary {
  std::size_t counted = 0, holding = 0, without = 0;
  double share = 0.0;
  double median_width_ratio = 0.0;
};
[[nodiscard]] CoverageSummary summarise(const std::vector<CoveragePoint>& points);

}  // namespace loadstair::whole
