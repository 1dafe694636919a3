#include <cmath>
#include <string>

#include "analysis/base/number.h"
#include "analysis/sensors/sensors.h"

namespace loadstair::sensors {
namespace {

using base::Refusal;

// IEC 60751:2008 clause 4.2.
constexpr double kA = 3.9083e-3;
constexpr double kB = -5.775e-7;
constexpr double kC = -4.183e-12;
constexpr double kPlatinumLow = -200.0;
constexpr double kPlatinumHigh = 850.0;
constexpr double kZeroCelsius = 273.15;

/// R/R0 and its slope.
Converted platinum_ratio(double t) {
  if (t >= 0.0) return {1.0 + t * (kA + kB * t), kA + 2.0 * kB * t};
  return {1.0 + t * (kA + t * (kB + kC * t * (t - 100.0))), kA + t * (2.0 * kB + kC * t * (4.0 * t - 300.0))};
}

Refusal outside(const char* place, double value, double low, double high, const char* unit) {
  return {place, base::print_significant(value, 6) + " " + unit + " is outside " +
                     base::print_significant(low, 6) + " to " + base::print_significant(high, 6) + " " +
                     unit + "; check the sensor and its wiring"};
}

}  // namespace

base::Outcome<Converted> platinum_resistance(double temperature_degc, double r0_ohm) {
  if (!(r0_ohm > 0.0)) return Refusal{"platinum thermometer", "its resistance at 0 degC must be above zero"};
  if (!(temperature_degc >= kPlatinumLow && temperature_degc <= kPlatinumHigh)) {
    return outside("platinum thermometer", temperature_degc, kPlatinumLow, kPlatinumHigh, "degC");
  }
  const Converted ratio = platinum_ratio(temperature_degc);
  return Converted{ratio.value * r0_ohm, ratio.sensitivity * r0_ohm};
}

base::Outcome<Converted> platinum_temperature(double resistance_ohm, double r0_ohm) {
  if (!(r0_ohm > 0.0)) return Refusal{"platinum thermometer", "its resistance at 0 degC must be above zero"};
  const double ratio = resistance_ohm / r0_ohm;
  const double least = platinum_ratio(kPlatinumLow).value;
  const double most = platinum_ratio(kPlatinumHigh).value;
  // Printed tables round the end points to 0.01 ohm; a reading rounded so is still inside.
  constexpr double kRounding = 0.5e-4;
  if (!(ratio >= least - kRounding && ratio <= most + kRounding)) {
    return outside("platinum thermometer", resistance_ohm, least * r0_ohm, most * r0_ohm, "ohm");
  }
  // Above zero the closed form of the quadratic; below, Newton from it (the quartic differs by less than 2.5
  // K).
  double t = 2.0 * (ratio - 1.0) / (kA + std::sqrt(kA * kA - 4.0 * kB * (1.0 - ratio)));
  Converted at = platinum_ratio(t);
  for (int i = 0; t < 0.0 && i < 50; ++i) {
    const double step = (at.value - ratio) / at.sensitivity;
    t -= step;
    at = platinum_ratio(t);
    if (std::abs(step) < 1e-11) break;
  }
  return Converted{t, 1.0 / (at.sensitivity * r0_ohm)};
}

base::Outcome<PlatinumClass> parse_platinum_class(std::string_view name) {
  if (name == "AA") return PlatinumClass::aa;
  if (name == "A") return PlatinumClass::a;
  if (name == "B") return PlatinumClass::b;
  if (name == "C") return PlatinumClass::c;
  return Refusal{"platinum class", "\"" + std::string{name} + "\" is not one of AA, A, B, C"};
}

base::Outcome<double> platinum_tolerance_k(PlatinumClass tolerance_class, PlatinumBuild build,
                                           double temperature_degc) {
  struct Row {
    const char* name;
    double absolute_k, relative;
    TemperatureRange wire, film;
  };
  // IEC 60751:2008 tolerance classes; ranges as confirmed in part only (tests/published/pt100/SOURCE.md).
  static constexpr Row kRows[] = {
      {"AA", 0.1, 0.0017, {-50, 250}, {0, 150}},
      {"A", 0.15, 0.002, {-100, 450}, {-30, 300}},
      {"B", 0.3, 0.005, {-196, 600}, {-50, 500}},
      {"C", 0.6, 0.01, {-196, 600}, {-50, 600}},
  };
  const Row& row = kRows[static_cast<std::size_t>(tolerance_class)];
  const TemperatureRange range = build == PlatinumBuild::wire_wound ? row.wire : row.film;
  if (!(temperature_degc >= range.low_degc && temperature_degc <= range.high_degc)) {
    return outside("platinum thermometer's tolerance class", temperature_degc, range.low_degc,
                   range.high_degc, "degC");
  }
  return row.absolute_k + row.relative * std::abs(temperature_degc);
}

namespace {

constexpr double kThermistorLow = -100.0;
constexpr double kThermistorHigh = 400.0;

/// From 1/T and d(1/T)/dR to degC and K/ohm.
base::Outcome<Converted> from_inverse_kelvin(double inverse, double inverse_slope) {
  const double kelvin = 1.0 / inverse;
  const double degc = kelvin - kZeroCelsius;
  if (!(inverse > 0.0) || !(degc >= kThermistorLow && degc <= kThermistorHigh)) {
    return outside("thermistor", degc, kThermistorLow, kThermistorHigh, "degC");
  }
  return Converted{degc, -kelvin * kelvin * inverse_slope};
}

Refusal not_a_resistance(double resistance_ohm) {
  return {"thermistor",
          base::print_significant(resistance_ohm, 6) + " ohm is no resistance; it must be above zero"};
}

}  // namespace

base::Outcome<Converted> thermistor_temperature(const SteinhartHart& thermistor, double resistance_ohm) {
  if (!(resistance_ohm > 0.0) || !std::isfinite(resistance_ohm)) return not_a_resistance(resistance_ohm);
  const double x = std::log(resistance_ohm);
  return from_inverse_kelvin(thermistor.a + x * (thermistor.b + thermistor.c * x * x),
                             (thermistor.b + 3.0 * thermistor.c * x * x) / resistance_ohm);
}

base::Outcome<Converted> thermistor_temperature(const Beta& thermistor, double resistance_ohm) {
  if (!(resistance_ohm > 0.0) || !std::isfinite(resistance_ohm)) return not_a_resistance(resistance_ohm);
  if (!(thermistor.r25_ohm > 0.0) || !(thermistor.beta_k > 0.0)) {
    return Refusal{"thermistor", "its reference resistance and beta must be above zero"};
  }
  return from_inverse_kelvin(1.0 / (thermistor.reference_degc + kZeroCelsius) +
                                 std::log(resistance_ohm / thermistor.r25_ohm) / thermistor.beta_k,
                             1.0 / (thermistor.beta_k * resistance_ohm));
}

base::Outcome<Converted> thermistor_resistance(const Beta& thermistor, double temperature_degc) {
  if (!(temperature_degc >= kThermistorLow && temperature_degc <= kThermistorHigh)) {
    return outside("thermistor", temperature_degc, kThermistorLow, kThermistorHigh, "degC");
  }
  if (!(thermistor.r25_ohm > 0.0) || !(thermistor.beta_k > 0.0)) {
    return Refusal{"thermistor", "its reference resistance and beta must be above zero"};
  }
  const double kelvin = temperature_degc + kZeroCelsius;
  const double r =
      thermistor.r25_ohm *
      std::exp(thermistor.beta_k * (1.0 / kelvin - 1.0 / (thermistor.reference_degc + kZeroCelsius)));
  return Converted{r, -thermistor.beta_k / (kelvin * kelvin) * r};
}

base::Outcome<ShuntCurrent> shunt_current(const Shunt& shunt, double voltage_v,
                                          std::optional<double> ambient_degc) {
  if (!(shunt.resistance_ohm > 0.0) || !std::isfinite(shunt.resistance_ohm)) {
    return Refusal{"shunt", "its resistance must be above zero"};
  }
  if (!std::isfinite(voltage_v)) return Refusal{"shunt", "the voltage across it is not a number"};
  const double ambient_rise = ambient_degc ? *ambient_degc - shunt.reference_degc : 0.0;
  const double ambient_ohm =
      shunt.resistance_ohm * (1.0 + shunt.temperature_coefficient_per_k * ambient_rise);
  // R = Ra + R0 a Rth U^2/R: a quadratic in R; the root that tends to Ra for small U is the stable one.
  const double heating = shunt.resistance_ohm * shunt.temperature_coefficient_per_k *
                         shunt.thermal_resistance_k_per_w * voltage_v * voltage_v;
  const double discriminant = ambient_ohm * ambient_ohm + 4.0 * heating;
  if (!(ambient_ohm > 0.0) || !(discriminant > 0.0)) {
    return Refusal{"shunt", "its temperature coefficient and heating leave no stable resistance at " +
                                base::print_significant(voltage_v, 4) + " V"};
  }
  const double root = std::sqrt(discriminant);
  const double warm_ohm = 0.5 * (ambient_ohm + root);
  ShuntCurrent out;
  out.current_a = voltage_v / warm_ohm;
  out.resistance_ohm = warm_ohm;
  out.power_w = voltage_v * out.current_a;
  out.rise_k = out.power_w * shunt.thermal_resistance_k_per_w;
  // dR/dU = 2 heating / (U root); dI/dU = 1/R - U/R^2 dR/dU.
  out.per_volt_a = 1.0 / warm_ohm - 2.0 * heating / (warm_ohm * warm_ohm * root);
  return out;
}

base::Outcome<double> winding_rise_k(double r_cold_ohm, double cold_degc, double r_hot_ohm,
                                     double ambient_when_hot_degc, double k) {
  if (!(r_cold_ohm > 0.0) || !(r_hot_ohm > 0.0)) {
    return Refusal{"winding", "both resistances must be above zero"};
  }
  return (r_hot_ohm - r_cold_ohm) / r_cold_ohm * (k + cold_degc) - (ambient_when_hot_degc - cold_degc);
}

}  // namespace loadstair::sensors
