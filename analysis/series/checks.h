// Checks shared by the files of this room; not for other rooms.
#pragma once

#include <optional>

#include "analysis/base/outcome.h"
#include "analysis/series/time_series.h"

namespace loadstair::series {

/// Why a series cannot be used: empty, unequal lengths, a number that is not finite, instants that decrease.
/// Readings are counted from 1 in the text. nullopt when nothing is wrong.
[[nodiscard]] std::optional<base::Refusal> fault_of(const TimeSeries& data);

}  // namespace loadstair::series
