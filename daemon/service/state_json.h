// The state of bench and run as JSON. Translation only.
#pragma once

#include <nlohmann/json_fwd.hpp>

#include "daemon/recorder/bench.h"
#include "daemon/sequencer/sequencer.h"

namespace loadstair::service {

/// utc_offset_ns  UTC minus monotonic time: dates the events
[[nodiscard]] nlohmann::json to_json(const sequencer::Snapshot& snapshot, std::int64_t utc_offset_ns);
[[nodiscard]] nlohmann::json to_json(const std::vector<recorder::ChannelNow>& channels);
[[nodiscard]] nlohmann::json to_json(const std::vector<recorder::InstrumentNow>& instruments);

}  // namespace loadstair::service
