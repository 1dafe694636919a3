#include "analysis/sensors/quoted.h"

#include <cmath>

namespace loadstair::sensors {
namespace {

using base::Refusal;
using estimate::Estimate;

/// An error of value zero, known to stay within +/- half_width.
Estimate own_error(double half_width, const std::string& name, const char* part) {
  return estimate::bounded(-half_width, half_width,
                           estimate::make_type_b(estimate::key::component(name, part), name + ": " + part,
                                                 estimate::Distribution::rectangular, {name, "", ""}));
}

estimate::Quoted with_tolerance(const base::Outcome<Converted>& found, const Estimate& resistance_ohm,
                                double tolerance_k, const std::string& name) {
  if (!found) return found.refusal();
  if (!(tolerance_k >= 0.0)) return Refusal{"thermistor", "its tolerance must not be below zero"};
  return estimate::combine(found->value, {{resistance_ohm, found->sensitivity}}) +
         own_error(tolerance_k, name, "tolerance");
}

}  // namespace

estimate::Quoted quoted_thermocouple(Thermocouple type, const Estimate& emf_v,
                                     const Estimate& cold_junction_degc, std::optional<int> tolerance_class,
                                     const std::string& name) {
  const auto found = thermocouple_temperature(type, emf_v.value(), cold_junction_degc.value());
  if (!found) return found.refusal();
  const Estimate degc = estimate::linear(found->temperature_degc, emf_v, found->per_emf_k_per_v,
                                         cold_junction_degc, found->per_cold_junction);
  if (!tolerance_class) return degc;
  const auto tolerance = thermocouple_tolerance_k(type, *tolerance_class, found->temperature_degc);
  if (!tolerance) return tolerance.refusal();
  return degc + own_error(*tolerance, name, "tolerance class");
}

estimate::Quoted quoted_platinum(const PlatinumSensor& sensor, const Estimate& resistance_ohm,
                                 const std::string& name) {
  if (!(sensor.lead_ohm >= 0.0) || !(sensor.lead_tolerance_percent >= 0.0)) {
    return Refusal{"platinum thermometer", "its leads' resistance and tolerance must not be below zero"};
  }
  const auto found = platinum_temperature(resistance_ohm.value() - sensor.lead_ohm, sensor.r0_ohm);
  if (!found) return found.refusal();
  const double lead_k = found->sensitivity * sensor.lead_ohm * sensor.lead_tolerance_percent / 100.0;
  Estimate degc = estimate::combine(found->value, {{resistance_ohm, found->sensitivity}});
  if (lead_k > 0.0) degc = degc + own_error(lead_k, name, "leads");
  if (!sensor.tolerance_class) return degc;
  const auto tolerance = platinum_tolerance_k(*sensor.tolerance_class, sensor.build, found->value);
  if (!tolerance) return tolerance.refusal();
  return degc + own_error(*tolerance, name, "tolerance class");
}

estimate::Quoted quoted_thermistor(const SteinhartHart& thermistor, const Estimate& resistance_ohm,
                                   double tolerance_k, const std::string& name) {
  return with_tolerance(thermistor_temperature(thermistor, resistance_ohm.value()), resistance_ohm,
                        tolerance_k, name);
}

estimate::Quoted quoted_thermistor(const Beta& thermistor, const Estimate& resistance_ohm, double tolerance_k,
                                   const std::string& name) {
  return with_tolerance(thermistor_temperature(thermistor, resistance_ohm.value()), resistance_ohm,
                        tolerance_k, name);
}

estimate::Quoted quoted_shunt(const Shunt& shunt, const ShuntErrors& errors, const Estimate& voltage_v,
                              const std::string& name) {
  if (!(errors.tolerance_percent >= 0.0) || !(errors.ambient_tolerance_k >= 0.0) ||
      !(errors.rise_tolerance_share >= 0.0)) {
    return Refusal{"shunt", "its tolerances must not be below zero"};
  }
  const auto found = shunt_current(shunt, voltage_v.value(), errors.ambient_degc);
  if (!found) return found.refusal();
  // Warm R solves R^2 - Ra R - H = 0 (Ra at ambient, H its self-heating): with D = 2 R - Ra,
  // dI/d ln R0 = -I R/D, and a kelvin more from elsewhere gives dI/dT = -I R0 alpha/D.
  const double ambient_rise = errors.ambient_degc ? *errors.ambient_degc - shunt.reference_degc : 0.0;
  const double ambient_ohm =
      shunt.resistance_ohm * (1.0 + shunt.temperature_coefficient_per_k * ambient_rise);
  const double root = 2.0 * found->resistance_ohm - ambient_ohm;
  const double by_resistance = -found->current_a * found->resistance_ohm / root;
  const double by_kelvin =
      -found->current_a * shunt.resistance_ohm * shunt.temperature_coefficient_per_k / root;
  const double temperature_k =
      errors.ambient_tolerance_k + errors.rise_tolerance_share * std::abs(found->rise_k);
  Estimate current = estimate::combine(found->current_a, {{voltage_v, found->per_volt_a}});
  // Signed, not absolute: where the shunt is a burden too, its source acts on both with its sign.
  const auto source = [&](const char* part) {
    return estimate::make_type_b(estimate::key::component(name, part), name + ": " + part,
                                 estimate::Distribution::rectangular, {name, "", ""});
  };
  const double root3 = std::sqrt(3.0);
  current =
      current + Estimate{0.0, source("resistance"), by_resistance * errors.tolerance_percent / 100.0 / root3};
  return current + Estimate{0.0, source("temperature"), by_kelvin * temperature_k / root3};
}

}  // namespace loadstair::sensors
