// From what the hook-up file declares to what analysis/sensors takes. Of this room only.
#pragma once

#include <cstdint>
#include <optional>
#include <string_view>

#include "analysis/sensors/sensors.h"
#include "daemon/setup/hookup.h"

namespace loadstair::evaluation {

[[nodiscard]] sensors::Shunt shunt_of(const setup::Shunt& shunt);
[[nodiscard]] base::Outcome<sensors::Thermocouple> thermocouple_of(const setup::Thermocouple& couple);

/// degC and its slope in K/ohm from what the meter reads; the leads of a two-wire connection are taken off.
[[nodiscard]] base::Outcome<sensors::Converted> platinum_temperature(const setup::Platinum& platinum,
                                                                     double ohm);
[[nodiscard]] base::Outcome<sensors::Converted> thermistor_temperature(const setup::Thermistor& thermistor,
                                                                       double ohm);

/// ohm; where the thermistor has no resistance at that temperature: nullopt.
[[nodiscard]] std::optional<double> thermistor_resistance(const setup::Thermistor& thermistor, double degc);

/// The worst of the flags that forbid a reading's use, in words; empty when there is none.
[[nodiscard]] std::string_view why_unusable(std::uint32_t flags);

}  // namespace loadstair::evaluation
