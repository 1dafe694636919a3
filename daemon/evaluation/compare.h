// Two evaluated runs held against each other, as plain values.
#pragma once

#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "analysis/base/outcome.h"
#include "daemon/evaluation/result.h"

namespace loadstair::evaluation {

/// One level, or one weighted figure.
struct DifferenceResult {
  std::string label;
  double load_w = 0.0;  ///< common load; 0 for a weighted figure
  Quantity difference;  ///< of the efficiency, other minus reference, ratio
  Quantity loss_difference;
  std::string decision;            ///< "better", "worse", "not resolved", "not compared"
  double unshared_share = 0.0;     ///< of the meters' variance, as assumed
  std::optional<double> flips_at;  ///< unshared share at which the decision changes; nullopt: none does
  double narrowing = 1.0;          ///< half-width if nothing were shared over the half-width
  std::string text;
};

struct ComparisonResult {
  std::int64_t reference = 0, run = 0;
  std::string reference_unit, unit;  ///< may be empty
  std::vector<DifferenceResult> levels, weighted;
  std::vector<std::string> remarks;
};

/// `other` against `reference`. A meter's lasting errors are common where both runs name the meter alike, on
/// the same range, with the same profile, serial number and calibration date; where one of these differs they
/// count as unshared, and a remark says so.
/// Errors:  refused for one run twice, and without a rated output power.
[[nodiscard]] base::Outcome<ComparisonResult> compare(const RunResult& reference, const RunResult& other);

}  // namespace loadstair::evaluation
