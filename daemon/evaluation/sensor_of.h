// From what the hook-up file declares to what analysis/sensors takes. Of this room only.
#pragma once

#include <cstdint>
#include <string_view>

#include "analysis/sensors/sensors.h"
#include "daemon/setup/hookup.h"

namespace loadstair::evaluation {

[[nodiscard]] sensors::Shunt shunt_of(const setup::Shunt& shunt);
[[nodiscard]] base::Outcome<sensors::Thermocouple> thermocouple_of(const setup::Thermocouple& couple);

/// The worst of the flags that forbid a reading's use, in words; empty when there is none.
[[nodiscard]] std::string_view why_unusable(std::uint32_t flags);

}  // namespace loadstair::evaluation
