// Input power without load and at standby, and whether the meters are the right ones for so little.
#pragma once

#include <span>
#include <string>
#include <vector>

#include "analysis/efficiency/port.h"

namespace loadstair::efficiency {

/// How much of its range a meter used.
struct RangeUse {
  std::string channel;
  double reading = 0;  ///< as the meter showed it
  double range = 0;    ///< full scale, same unit; 0 when not known
};

/// Below this share of the range the part of a specification that goes with the range outweighs the part that
/// goes with the reading for any usual meter. Common practice, no source.
inline constexpr double kLeastOfRange = 0.05;

struct IdlePower {
  Quoted power = base::Refusal{};    ///< W
  std::vector<std::string> remarks;  ///< meters used below 5 % of their range, negative power
};

/// input_power  of the step: the sum of what is counted, W
/// uses         of the meters that it comes from
/// Never NaN: a power that is not finite is refused.
[[nodiscard]] IdlePower idle_power(const Quoted& input_power, std::span<const RangeUse> uses);

}  // namespace loadstair::efficiency
