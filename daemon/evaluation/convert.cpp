#include <algorithm>
#include <array>
#include <cmath>

#include "analysis/base/number.h"
#include "analysis/sensors/sensors.h"
#include "daemon/evaluation/live.h"
#include "daemon/evaluation/sensor_of.h"

namespace loadstair::evaluation {
namespace {

struct FlagText {
  std::uint32_t flag;
  std::string_view text;
};
constexpr std::array kFlagTexts = {
    FlagText{instrument::kMissing, "no reply came in time"},
    FlagText{instrument::kOverload, "the instrument says overload"},
    FlagText{instrument::kUnitChanged, "the instrument is on another function or unit than its profile says"},
    FlagText{instrument::kInvalid, "the reply held no number"},
    FlagText{instrument::kStale, "the instrument repeated an old reading"},
    FlagText{instrument::kSuperseded, "the value was corrected"},
};

}  // namespace

sensors::Shunt shunt_of(const setup::Shunt& shunt) {
  return {.resistance_ohm = shunt.resistance_ohm,
          .temperature_coefficient_per_k = shunt.tempco_ppm_per_k * 1e-6,
          .thermal_resistance_k_per_w = shunt.rise_k_per_w};
}

base::Outcome<sensors::Thermocouple> thermocouple_of(const setup::Thermocouple& couple) {
  return sensors::parse_thermocouple({&couple.letter, 1});
}

base::Outcome<sensors::Converted> platinum_temperature(const setup::Platinum& platinum, double ohm) {
  return sensors::platinum_temperature(ohm - platinum.lead_ohm, platinum.r0_ohm);
}

base::Outcome<sensors::Converted> thermistor_temperature(const setup::Thermistor& thermistor, double ohm) {
  if (thermistor.r25_ohm > 0.0) {
    return sensors::thermistor_temperature(
        sensors::Beta{.r25_ohm = thermistor.r25_ohm, .beta_k = thermistor.beta_k}, ohm);
  }
  return sensors::thermistor_temperature(sensors::SteinhartHart{thermistor.a, thermistor.b, thermistor.c},
                                         ohm);
}

std::optional<double> thermistor_resistance(const setup::Thermistor& thermistor, double degc) {
  if (thermistor.r25_ohm > 0.0) {
    const auto ohm = sensors::thermistor_resistance(
        sensors::Beta{.r25_ohm = thermistor.r25_ohm, .beta_k = thermistor.beta_k}, degc);
    return ohm ? std::optional{ohm->value} : std::nullopt;
  }
  // Falling with temperature: halving ln R between a milliohm and a gigaohm.
  double low = std::log(1e-3);
  double high = std::log(1e9);
  for (int i = 0; i < 100; ++i) {
    const double middle = (low + high) / 2.0;
    const double inverse_k = thermistor.a + thermistor.b * middle + thermistor.c * middle * middle * middle;
    (inverse_k < 1.0 / (degc + 273.15) ? low : high) = middle;
  }
  const auto back = thermistor_temperature(thermistor, std::exp(low));
  if (!back || std::abs(back->value - degc) > 1e-3) return std::nullopt;
  return std::exp(low);
}

std::string_view why_unusable(std::uint32_t flags) {
  for (const FlagText& one : kFlagTexts) {
    if ((flags & one.flag) != 0) return one.text;
  }
  return {};
}

base::Outcome<double> convert(const setup::Channel& channel, double raw,
                              std::optional<double> cold_junction_degc) {
  if (!std::isfinite(raw)) return base::Refusal{channel.name, "not a number"};
  const setup::Conversion& conversion = channel.conversion;
  double value = raw * conversion.scale;
  if (conversion.shunt) {
    const auto current =
        sensors::shunt_current(shunt_of(*conversion.shunt), value, conversion.shunt->ambient_c);
    if (!current) return base::Refusal{channel.name, current.refusal().text()};
    value = current->current_a;
  } else if (conversion.thermocouple && !conversion.thermocouple->cold_junction.empty()) {
    const auto type = thermocouple_of(*conversion.thermocouple);
    if (!type) return base::Refusal{channel.name, type.refusal().text()};
    if (!cold_junction_degc) {
      return base::Refusal{channel.name,
                           "no reading of its cold junction, " + conversion.thermocouple->cold_junction};
    }
    const auto junction = sensors::thermocouple_temperature(*type, value, *cold_junction_degc);
    if (!junction) return base::Refusal{channel.name, junction.refusal().text()};
    value = junction->temperature_degc;
  } else if (conversion.platinum || conversion.thermistor) {
    const auto found = conversion.platinum ? platinum_temperature(*conversion.platinum, value)
                                           : thermistor_temperature(*conversion.thermistor, value);
    if (!found) return base::Refusal{channel.name, found.refusal().text()};
    value = found->value;
  }
  if (!std::isfinite(value))
    return base::Refusal{channel.name, "beyond every number: " + base::print_number(raw)};
  return value;
}

base::Outcome<double> convert(const setup::Channel& channel, const instrument::Reading& reading,
                              std::optional<double> cold_junction_degc) {
  if (const std::uint32_t bad = reading.flags & instrument::kUnusable; bad != 0) {
    return base::Refusal{channel.name, std::string{why_unusable(bad)}};
  }
  return convert(channel, reading.value, cold_junction_degc);
}

double electrical_floor(const setup::Channel& channel) {
  constexpr double kShare = 0.01;
  double largest = 0.0;
  for (const setup::RangeSpec& range : channel.ranges) {
    const auto full_scale = convert(channel, range.upto, 25.0);
    if (full_scale) largest = std::max(largest, std::abs(*full_scale));
  }
  return kShare * (largest > 0.0 ? largest : 1.0);
}

}  // namespace loadstair::evaluation
