// Where a meter's specification holds, and what becomes of it outside.
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "analysis/estimate/meter.h"

namespace loadstair::estimate {

/// As the hook-up file declares them; what is not declared is not judged.
struct SpecificationConditions {
  std::optional<double> reference_low_c;  ///< temperature span in which the accuracy holds as it stands
  std::optional<double> reference_high_c;
  std::optional<double> reading_percent_per_k;  ///< what each kelvin outside the span adds, % of reading
  std::optional<double> range_percent_per_k;    ///< the same, % of range
  std::optional<double> most_days;              ///< since adjustment
  std::optional<double> least_percent_of_range;
  std::optional<double> band_low_hz;
  std::optional<double> band_high_hz;
  std::optional<double> crest_factor_limit;  ///< at full scale of the range
  std::optional<double> least_power_factor;
};

/// What it was like; empty where nobody knows.
struct Conditions {
  std::optional<double> ambient_c;
  std::optional<double> days_since_adjustment;
  std::optional<double> frequency_hz;
  std::optional<double> crest_factor;
  std::optional<double> power_factor;  ///< its sign does not matter
};

struct ConditionsFound {
  /// One sentence per condition that did not hold, for a person, in the order of the struct.
  std::vector<std::string> violated;
  /// Conditions that are declared but whose actual value nobody knows ("ambient temperature").
  std::vector<std::string> not_checked;
  /// The range with the accuracy that applies: grown where the file says how, else as it was.
  MeterRange meter;
  /// Whether every violated condition is covered by the growth.
  bool allowed_for = true;
  /// Whether the fixed part may be taken as common with other runs (false outside the temperature span and
  /// after the calibration interval).
  bool fixed_is_common = true;
};

/// Holds a reading against the conditions of its specification. With k kelvin outside the span the limits
/// grow by k x (reading_percent_per_k, range_percent_per_k); the distribution stays. A temperature outside
/// the span without a coefficient, and every other condition, only raises the flag.
/// reading  unit of the range; |reading| over the range is what least_percent_of_range is held against
/// Source:  common practice of specifications; JCGM 100:2008 4.3.7 for limits.
[[nodiscard]] ConditionsFound judge_conditions(double reading, const MeterRange& meter,
                                               const SpecificationConditions& specification,
                                               const Conditions& conditions);

}  // namespace loadstair::estimate
