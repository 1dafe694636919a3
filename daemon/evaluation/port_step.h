// The ports of a step as analysis/efficiency takes them. Of this room only.
#pragma once

#include <string>
#include <vector>

#include "analysis/efficiency/step.h"
#include "daemon/evaluation/capture_result.h"
#include "daemon/evaluation/channel_value.h"

namespace loadstair::evaluation {

/// A wattmeter's port with its functions' errors taken as independent.
struct UnsharedPower {
  std::string port;
  estimate::Estimate volt_ampere, watt;
};

/// What a step's powers are computed from.
struct StepValues {
  const setup::Hookup* hookup = nullptr;
  std::vector<ChannelValue> channels;  ///< in the hook-up file's order
  std::vector<CaptureAnalysis> captures;
  std::vector<UnsharedPower> unshared;  ///< for cross-checks
  WindowContext context;

  [[nodiscard]] const ChannelValue* find(const std::string& channel) const;
};

/// The step's powers, loss and efficiency.
struct StepPowers {
  efficiency::StepResult totals;  ///< with the statistical parts of the aligned series
  efficiency::StepResult ports;   ///< each port on its own: its noise through the chain rule
  efficiency::StepInput input;    ///< what the totals were made from
};
/// plain   what is not known of uncertainties is left out: values only
[[nodiscard]] StepPowers step_powers(const StepValues& values, bool plain);

/// What is not known of the uncertainties that enter a power, in words; empty when all is known.
[[nodiscard]] std::string unknown_of(const StepValues& values);

}  // namespace loadstair::evaluation
