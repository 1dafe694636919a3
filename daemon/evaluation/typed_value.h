// What a person typed at a step, as a channel's value. Of this room only.
#pragma once

#include "daemon/evaluation/channel_value.h"

namespace loadstair::evaluation {

/// The mean of the rounds; their spread, and how little is known of their instants, as a bound.
void fill_typed(ChannelValue& into, const store::StoredRun& run, const setup::Hookup& hookup,
                const Track& track, const WindowContext& context);

}  // namespace loadstair::evaluation
