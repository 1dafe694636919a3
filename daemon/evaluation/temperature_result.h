// Where a step's temperatures end. Of this room only.
#pragma once

#include <vector>

#include "daemon/evaluation/channel_value.h"
#include "daemon/evaluation/result.h"
#include "daemon/setup/stair.h"

namespace loadstair::evaluation {

/// plan      the step in the stair file; nullptr when the record has a step that the file has not
/// begun_s   when the step's set point was applied: where its approach to the end begins
/// last      the last step of the run goes by rate: a prediction is not used
[[nodiscard]] std::vector<TemperatureResult> temperatures_of(
    const setup::Hookup& hookup, const setup::Step* plan, const std::vector<Track>& tracks,
    const std::vector<ChannelValue>& channels, const WindowContext& context, double begun_s, bool last);

}  // namespace loadstair::evaluation
