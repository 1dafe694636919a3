// A meter's specification, turned into sources of error.
#pragma once

#include <optional>
#include <string>

#include "analysis/estimate/estimate.h"

namespace loadstair::estimate {

/// +/-(a % of reading + b % of range + c digits).
struct AccuracySpec {
  double percent_of_reading = 0;
  double percent_of_range = 0;
  double digits = 0;  ///< counts of the last digit; above zero they contain the resolution
  Distribution distribution = Distribution::rectangular;
  double coverage_factor = 2;  ///< at which the limits are declared; used with Distribution::normal only
};

/// A meter on one range. One meter moved between ports is the same Owner, hence the same sources; another
/// range is another Owner.
struct MeterRange {
  Owner meter;
  double range = 0;  ///< full scale, unit of the reading; for a wattmeter V range times I range
  double digit = 0;  ///< weight of the last digit, unit of the reading; 0 when not known
  std::optional<AccuracySpec> accuracy;
};

/// How the variance of each source splits over what it is common to. They sum to 1.
/// Defaults: common practice, no source; a declared repeatability or a tie check replaces them.
struct Shares {
  double fixed = 0.8;      ///< the same in every run with this meter, function and range
  double per_run = 0.1;    ///< new for every run
  double per_level = 0.1;  ///< new for every level: linearity
};

/// When a reading was taken, as far as the shares care.
struct Occasion {
  std::string run;
  std::string level;  ///< unlike for readings whose linearity errors are unlike: step and channel
};

/// A reading with its meter's error: gain and offset, each with a fixed part and one per run, linearity per
/// level, and the resolution where the digits do not contain it.
///
/// With g = a/100 |reading| and o = b/100 range + c digit (half-widths), u_g = g/d and u_o = o/d (d from the
/// distribution, sqrt 3 for rectangular), the contributions are
///   gain       sign(reading) u_g sqrt(fixed), u_g sqrt(per_run)
///   offset     u_o sqrt(fixed), u_o sqrt(per_run)
///   linearity  sqrt(per_level (u_g^2 + u_o^2))
/// so that their variance is exactly u_g^2 + u_o^2: the splitting decides what is shared, never how much
/// there is. Gain and offset are independent rectangular errors, as methods.md has it: an error that always
/// sits at the sum of both limits is not assumed.
///
/// reading  unit of the range; the mean of a window is one reading
/// Errors:  refused when no accuracy is declared for the range ("uncertainty not known"), when the reading is
/// not
///          finite, or a declared figure is negative.
/// Source:  JCGM 100:2008 4.3.7 (rectangular), F.2.2.1 (resolution q / sqrt 12).
[[nodiscard]] Quoted with_meter_error(double reading, const MeterRange& meter, const Occasion& occasion,
                                      const Shares& shares = {});

/// What a wattmeter shows of one port at one time, with the specification of each function.
struct WattmeterReading {
  double voltage = 0;
  double current = 0;
  double active_power = 0;
  MeterRange voltage_range;
  MeterRange current_range;
  MeterRange power_range;      ///< range = V range times I range
  double phase_limit_rad = 0;  ///< half-width of the phase error between the voltage and the current circuit
};

struct WattmeterEstimates {
  Estimate voltage;
  Estimate current;
  Estimate active_power;
};

/// Voltage, current and active power with shared sources: the power's gain error is carried by the gain
/// sources of voltage and current as far as its own specification allows (scaled down where theirs is
/// larger), the rest by its own; plus P tan(phi) u(phi). Each total variance is what its own specification
/// says. Errors: as with_meter_error().
[[nodiscard]] base::Outcome<WattmeterEstimates> with_wattmeter_error(const WattmeterReading& reading,
                                                                     const Occasion& occasion,
                                                                     const Shares& shares = {});

}  // namespace loadstair::estimate
