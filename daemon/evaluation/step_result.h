// One step's results. Of this room only.
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "analysis/efficiency/idle_power.h"
#include "analysis/efficiency/step.h"
#include "daemon/evaluation/capture_result.h"
#include "daemon/evaluation/channel_value.h"
#include "daemon/evaluation/result.h"
#include "daemon/evaluation/track.h"
#include "daemon/setup/stair.h"

namespace loadstair::evaluation {

struct StepOutcome {
  StepResult result;
  setup::StepKind kind = setup::StepKind::level;
  const setup::Step* plan =
      nullptr;  ///< in the stair file; nullptr when the record has a step that it has not
  /// With their sources, for the curve and for figures of the run; refused quantities where the step has
  /// none. Without load and at standby there is an input power, and no efficiency.
  efficiency::StepResult powers;
  std::vector<CaptureAnalysis> captures;     ///< of this step
  std::vector<efficiency::PortPower> ports;  ///< in the hook-up file's order, each with its own noise
  std::vector<efficiency::RangeUse> uses;    ///< of the meters at counted inputs
};

/// The step of the stair file that a recorded one is; nullptr when the file has no such step.
[[nodiscard]] const setup::Step* plan_of(const setup::Stair& stair, const store::StoredStep& step);

/// The averaging window of a step with what was around it; nullopt when it was not measured. `name` is the
/// step's label, made unique within the run.
[[nodiscard]] std::optional<WindowContext> window_of(const store::StoredRun& run, const setup::Hookup& hookup,
                                                     const setup::Stair& stair,
                                                     const std::vector<Track>& tracks,
                                                     const store::StoredStep& step, const std::string& name);

/// window   of window_of(), with the checks of the bench that are applied
[[nodiscard]] StepOutcome step_outcome(const store::StoredRun& run, const setup::Hookup& hookup,
                                       const setup::Stair& stair, const std::vector<Track>& tracks,
                                       const store::StoredStep& step,
                                       const std::optional<WindowContext>& window, bool validating);

}  // namespace loadstair::evaluation
