// One step: input and output power, loss and efficiency with shared sources.
#pragma once

#include <optional>
#include <span>
#include <string>
#include <vector>

#include "analysis/efficiency/port.h"
#include "analysis/estimate/type_a.h"
#include "analysis/series/steady_window.h"

namespace loadstair::efficiency {

/// One port's power over the window at the common instants, uncorrected, W.
struct PortSeries {
  Role role = Role::input;
  bool counted = true;
  std::span<const double> power_w;
};

/// Statistical parts of a step's results, each an estimate of value zero with Type A and drift contributions
/// only.
struct StepNoise {
  Estimate input_power;
  Estimate output_power;
  Estimate loss;
  Estimate efficiency;
  bool too_short = false;      ///< under 20 readings or 20 correlation times: bounds instead of Type A
  std::size_t count = 0;       ///< aligned instants
  double effective_count = 0;  ///< of the efficiency series; 0 where there is none
};

/// Type A on the aligned series of P_in, P_out, loss and efficiency themselves, with their covariances.
/// time_s  the common instants, as many as each port's powers
/// Errors: refused when a series is empty, of another length or not finite. Without a counted input, or with
/// a
///         mean input that is not above zero, the efficiency's part is empty: there is no efficiency then.
/// Source: JCGM 100:2008 H.2.4, second approach; the efficiency as a ratio of means, so that bursts of the
///         input count in it.
[[nodiscard]] base::Outcome<StepNoise> step_noise(std::span<const double> time_s,
                                                  std::span<const PortSeries> ports,
                                                  const estimate::WindowId& id,
                                                  const series::SteadyWindowSettings& settings = {});

struct StepInput {
  std::string label;
  std::vector<Port> ports;
  std::vector<PortReading> readings;  ///< one per port, same order
  /// Statistical parts found on the series. Then the readings carry no Type A parts of their own; without it
  /// they may, and their noise goes through the chain rule.
  std::optional<StepNoise> noise;
};

struct StepResult {
  std::string label;
  std::string
      state;  ///< "measured", "apparent power only", "missing channel ...": the worst of its counted ports
  std::vector<PortPower> ports;
  Quoted input_power = base::Refusal{};   ///< W, counted inputs
  Quoted output_power = base::Refusal{};  ///< W, counted outputs
  Quoted loss = base::Refusal{};          ///< W
  Quoted efficiency = base::Refusal{};    ///< ratio
  Quoted power_factor = base::Refusal{};  ///< of the one AC output, else of the one AC input, else refused
  std::vector<std::string>
      remarks;  ///< of the ports, auxiliaries counted or not, efficiency passing 100 %, ...
};

/// eta = sum P_out / sum P_in, loss = sum P_in - sum P_out.
/// Never throws for what a bench gives: a result that cannot be had is a refusal that says why.
[[nodiscard]] StepResult step_result(const StepInput& input);

}  // namespace loadstair::efficiency
