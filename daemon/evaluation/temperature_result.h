// Where a step's temperatures end, and what follows from it. Of this room only.
#pragma once

#include <optional>
#include <vector>

#include "daemon/evaluation/channel_value.h"
#include "daemon/evaluation/result.h"
#include "daemon/setup/stair.h"

namespace loadstair::evaluation {

/// What a step's temperatures are judged with.
struct StepThermal {
  const setup::Step* plan =
      nullptr;           ///< in the stair file; nullptr when the record has a step that the file has not
  double begun_s = 0.0;  ///< when the set point was applied: where the approach to the end begins
  bool last =
      false;  ///< the last step of the run goes by rate: a prediction is not used, but put to the test
  estimate::Quoted loss = base::Refusal{"loss", "not measured"};  ///< W
  double highest_ambient_c = 40.0;
};

struct EndTemperature {
  TemperatureResult result;
  /// The end less the value at mid-window, K: the sensor's own errors are in both and left out. None where
  /// there is no end.
  std::optional<estimate::Estimate> remaining_k;
};

/// One per temperature point of the hook-up file whose channel exists, in its order.
[[nodiscard]] std::vector<EndTemperature> temperatures_of(const setup::Hookup& hookup,
                                                          const std::vector<Track>& tracks,
                                                          const std::vector<ChannelValue>& channels,
                                                          const WindowContext& context,
                                                          const StepThermal& thermal);

}  // namespace loadstair::evaluation
