// How far the output voltage goes with the load, and with the input voltage.
#pragma once

#include <span>
#include <string>
#include <vector>

#include "analysis/efficiency/port.h"

namespace loadstair::efficiency {

/// One steady level.
struct RegulationPoint {
  std::string label;
  double at = 0;            ///< what is varied: output power, W (load); input voltage, V (line)
  Estimate output_voltage;  ///< V; RMS on AC
};

/// Two settings nearer than this share of the greater one are one setting.
inline constexpr double kSameSetting = 0.01;

struct Regulation {
  Estimate value;               ///< ratio to the nominal voltage, signed
  std::string least, greatest;  ///< labels of the two levels
  double from = 0, to = 0;      ///< their settings
  /// Greatest less least output voltage over all levels, ratio to nominal: more than |value| where the
  /// voltage does not go one way.
  double widest = 0;
};

/// (V at the least load - V at the greatest load) / nominal: above zero where the voltage falls with the
/// load. What both voltages have in common (the gain of one meter on one range) counts on their difference
/// only.
/// points     in any order, all at one input voltage
/// nominal_v  rated output voltage, above zero
/// Errors:    refused for fewer than two different loads, numbers that are not finite, a nominal not above 0.
/// Source:    definition common practice, no source.
[[nodiscard]] base::Outcome<Regulation> load_regulation(std::span<const RegulationPoint> points,
                                                        double nominal_v);

/// (V at the highest input voltage - V at the lowest) / nominal, at one load; as above otherwise.
[[nodiscard]] base::Outcome<Regulation> line_regulation(std::span<const RegulationPoint> points,
                                                        double nominal_v);

}  // namespace loadstair::efficiency
