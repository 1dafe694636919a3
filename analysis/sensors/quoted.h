// What a sensor gives as an Estimate: the raw value's uncertainty through the slope, and the sensor's own
// tolerance as sources named after it. Not for the meter's errors, which come in with the raw value.
#pragma once

#include <optional>
#include <string>

#include "analysis/estimate/estimate.h"
#include "analysis/sensors/sensors.h"

namespace loadstair::sensors {

/// A sensor's own errors are sources with keys component/NAME/...: one sensor met twice is one source. All
/// are rectangular (JCGM 100:2008 4.3.7).

/// degC. The cold junction enters as emf. tolerance_class nullopt: the couple's own error is left out, for
/// couples that are calibrated.
/// Refused: as thermocouple_temperature() and thermocouple_tolerance_k().
[[nodiscard]] estimate::Quoted quoted_thermocouple(Thermocouple type, const estimate::Estimate& emf_v,
                                                   const estimate::Estimate& cold_junction_degc,
                                                   std::optional<int> tolerance_class,
                                                   const std::string& name);

struct PlatinumSensor {
  double r0_ohm = 100.0;
  std::optional<PlatinumClass> tolerance_class;  ///< nullopt: calibrated, no error of its own
  PlatinumBuild build = PlatinumBuild::film;
  double lead_ohm = 0.0;                 ///< of both leads of a two-wire connection, taken off
  double lead_tolerance_percent = 30.0;  ///< of lead_ohm (common practice, no source)
};
/// degC, from ohm as the meter reads it.
/// Refused: as platinum_temperature() and platinum_tolerance_k(); a lead below zero.
[[nodiscard]] estimate::Quoted quoted_platinum(const PlatinumSensor& sensor,
                                               const estimate::Estimate& resistance_ohm,
                                               const std::string& name);

/// degC. tolerance_k: half-width of the sensor's own error, at least 0.
/// Refused: as thermistor_temperature(); a tolerance below zero.
[[nodiscard]] estimate::Quoted quoted_thermistor(const SteinhartHart& thermistor,
                                                 const estimate::Estimate& resistance_ohm, double tolerance_k,
                                                 const std::string& name);
[[nodiscard]] estimate::Quoted quoted_thermistor(const Beta& thermistor,
                                                 const estimate::Estimate& resistance_ohm, double tolerance_k,
                                                 const std::string& name);

struct ShuntErrors {
  double tolerance_percent = 0.0;      ///< of the resistance, half-width
  std::optional<double> ambient_degc;  ///< around the shunt; nullopt: its reference temperature
  double ambient_tolerance_k = 2.0;    ///< half-width (common practice, no source)
  double rise_tolerance_share = 0.3;   ///< of its own rise, half-width (common practice, no source)
};
/// A. Resistance and temperature are two sources; the temperature's is ambient and own rise together, taken
/// at their limits at once. Refused: as shunt_current(); errors below zero.
[[nodiscard]] estimate::Quoted quoted_shunt(const Shunt& shunt, const ShuntErrors& errors,
                                            const estimate::Estimate& voltage_v, const std::string& name);

}  // namespace loadstair::sensors
