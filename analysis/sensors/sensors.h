// sensors: from what a sensor gives (emf, ohms, volts across a shunt) to the quantity it stands for, with the
// slope that carries uncertainty. Not for meters' own accuracy (analysis/estimate) and not for scope probes
// (waveform).
#pragma once

#include <optional>
#include <string_view>

#include "analysis/base/outcome.h"

namespace loadstair::sensors {

/// A converted value and what a small change of the raw value does to it.
struct Converted {
  double value = 0.0;        ///< in the unit that the function names
  double sensitivity = 0.0;  ///< d value / d raw, in the units of both
};

/// The eight letter-designated thermocouples.
enum class Thermocouple { b, e, j, k, n, r, s, t };

/// "K" or "k". Refuses anything but the eight letters.
base::Outcome<Thermocouple> parse_thermocouple(std::string_view letter);
char letter_of(Thermocouple type);

/// Temperatures over which a type is defined; the inverse of B starts at 250 degC, where its emf is unique.
struct TemperatureRange {
  double low_degc = 0.0;
  double high_degc = 0.0;
};
TemperatureRange direct_range(Thermocouple type);
TemperatureRange inverse_range(Thermocouple type);

/// emf against 0 degC, value in V, sensitivity (Seebeck coefficient) in V/K.
/// Refuses a temperature outside direct_range(). Source: NIST Monograph 175 (1993), ITS-90 reference
/// functions.
base::Outcome<Converted> thermocouple_emf(Thermocouple type, double temperature_degc);

/// A junction's temperature from the measured emf; the cold junction counts as emf, not as degrees.
struct JunctionTemperature {
  double temperature_degc = 0.0;
  double per_emf_k_per_v = 0.0;    ///< d temperature / d measured emf
  double per_cold_junction = 0.0;  ///< d temperature / d cold junction temperature
};
/// emf_v                measured, V.
/// cold_junction_degc   temperature where the thermocouple meets copper.
/// Refuses what lies outside the type's range; never extrapolates. The root of the reference function, to
/// 1e-9 K.
base::Outcome<JunctionTemperature> thermocouple_temperature(Thermocouple type, double emf_v,
                                                            double cold_junction_degc = 0.0);

/// The published inverse polynomial (approximate), emf against 0 degC. For comparison with other readers;
/// results use the exact root.
base::Outcome<double> thermocouple_temperature_approximate(Thermocouple type, double emf_v);

/// Half-width in K of tolerance class 1, 2 or 3 at a temperature. Source: IEC 60584-1:2013.
/// Refuses classes that do not exist for the type, and temperatures outside the class.
base::Outcome<double> thermocouple_tolerance_k(Thermocouple type, int tolerance_class,
                                               double temperature_degc);

/// Industrial platinum thermometers, -200 to 850 degC. Source: IEC 60751:2008 clause 4.2.
/// r0_ohm   resistance at 0 degC: 100 (Pt100), 1000 (Pt1000), ...
base::Outcome<Converted> platinum_resistance(double temperature_degc, double r0_ohm = 100.0);  ///< ohm, ohm/K
base::Outcome<Converted> platinum_temperature(double resistance_ohm, double r0_ohm = 100.0);  ///< degC, K/ohm

enum class PlatinumClass { aa, a, b, c };
enum class PlatinumBuild { wire_wound, film };
/// "AA", "A", "B", "C".
base::Outcome<PlatinumClass> parse_platinum_class(std::string_view name);
/// Half-width in K. Refuses temperatures outside the class's validity for that build.
base::Outcome<double> platinum_tolerance_k(PlatinumClass tolerance_class, PlatinumBuild build,
                                           double temperature_degc);

/// 1/T = a + b ln R + c (ln R)^3, T in kelvin, R in ohm. Source: Steinhart and Hart (1968).
struct SteinhartHart {
  double a = 0.0, b = 0.0, c = 0.0;
};
/// R = r25_ohm exp(beta (1/T - 1/298.15 K)).
struct Beta {
  double r25_ohm = 0.0;
  double beta_k = 0.0;
  double reference_degc = 25.0;  ///< temperature of r25_ohm
};
/// degC, K/ohm. Refuse resistances that are not positive and results outside -100 to 400 degC.
base::Outcome<Converted> thermistor_temperature(const SteinhartHart& thermistor, double resistance_ohm);
base::Outcome<Converted> thermistor_temperature(const Beta& thermistor, double resistance_ohm);
/// ohm, ohm/K.
base::Outcome<Converted> thermistor_resistance(const Beta& thermistor, double temperature_degc);

/// A current shunt.
struct Shunt {
  double resistance_ohm = 0.0;  ///< at reference_degc, > 0
  double temperature_coefficient_per_k = 0.0;
  double reference_degc = 23.0;
  double thermal_resistance_k_per_w = 0.0;  ///< self-heating, K per watt; 0: none declared
};
struct ShuntCurrent {
  double current_a = 0.0;
  double per_volt_a = 0.0;      ///< d current / d voltage
  double resistance_ohm = 0.0;  ///< as it was, warm
  double power_w = 0.0;         ///< dissipated in it
  double rise_k = 0.0;          ///< by its own heat
};
/// The current for a voltage across the shunt; with self-heating the resistance that the current itself
/// makes. Refuses a resistance that is not positive and finite, and self-heating that has no stable answer.
base::Outcome<ShuntCurrent> shunt_current(const Shunt& shunt, double voltage_v,
                                          std::optional<double> ambient_degc = std::nullopt);

/// Rise of a winding by resistance: (r_hot - r_cold)/r_cold (k + t_cold) - (t_hot_ambient - t_cold);
/// k = 234.5 copper, 225 aluminium (IEC safety standards; from memory).
base::Outcome<double> winding_rise_k(double r_cold_ohm, double cold_degc, double r_hot_ohm,
                                     double ambient_when_hot_degc, double k = 234.5);

}  // namespace loadstair::sensors
