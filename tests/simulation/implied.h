// The half-width that the declared figures imply without any noise: k times the root of the sum of squares,
// in the simulation's own arithmetic.
#pragma once

#include <map>
#include <string>
#include <vector>

#include "simulation/plant.h"

namespace loadstair::simulation {

/// One independent error of standard deviation 1: what it does to both powers, W.
struct Effect {
  double input_w = 0.0, output_w = 0.0;
  double shared = 0.0;  ///< share of its variance that two runs on this bench have in common
};
using Effects = std::map<std::string, Effect>;

/// Every error of the declared figures at an operating point. Rectangular: half-width over sqrt 3 (JCGM
/// 100:2008 4.3.7); a last digit outside the limits: q / sqrt 12 (F.2.2.1).
[[nodiscard]] Effects effects_of(const Bench& bench, const Moment& middle);

struct Widths {
  double input_w = 0.0, output_w = 0.0, efficiency = 0.0, loss_w = 0.0;
};
/// 95 %: 1.96 times the standard deviation.
[[nodiscard]] Widths widths_of(const Effects& effects, const Truth& truth);
/// The same for efficiency b - efficiency a of two runs.
[[nodiscard]] double width_of_difference(const Effects& a, const Truth& truth_a, const Effects& b,
                                         const Truth& truth_b);

/// Power at the terminals from what the meters of a port show (signals by kind), with the wiring as believed.
[[nodiscard]] double recovered_w(const PortPlan& port, const std::map<Signal, double>& shown,
                                 const Wiring& wiring, double ripple_w);

}  // namespace loadstair::simulation
