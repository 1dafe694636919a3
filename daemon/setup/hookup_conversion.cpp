// From what a meter says to the quantity: shunts, temperature sensors, scales.
#include <array>

#include "analysis/base/number.h"
#include "daemon/setup/hookup_parts.h"
#include "daemon/setup/reading.h"

namespace loadstair::setup {
namespace {

using document::Bounds;
using document::Choice;
using document::kNotNegative;
using document::kPositive;
using document::ObjectReader;
using document::print_text;
using document::Type;

// Shares in percent of a reading: beyond all of it nothing was measured.
constexpr Bounds kPercent{0.0, 100.0, false};
constexpr Bounds kCelsius{-60.0, 200.0, false};
constexpr std::array kBuilds = {Choice<bool>{"film", true}, Choice<bool>{"wire-wound", false}};
constexpr std::array kPlatinumClasses = {
    Choice<std::string_view>{"AA", "AA"}, Choice<std::string_view>{"A", "A"},
    Choice<std::string_view>{"B", "B"}, Choice<std::string_view>{"C", "C"}};

Shunt read_shunt(ObjectReader& reader) {
  Shunt shunt;
  shunt.resistance_ohm = reader.number("resistance_ohm", kPositive, "\"resistance_ohm\": 0.1");
  shunt.tolerance_percent = reader.number_or("tolerance_percent", kPercent, 0.0);
  shunt.tempco_ppm_per_k = reader.number_or("tempco_ppm_per_k", {-10000.0, 10000.0}, 0.0);
  shunt.rise_k_per_w = reader.number_or("rise_k_per_w", kNotNegative, 0.0);
  shunt.ambient_c = reader.maybe_number("ambient_c", kCelsius);
  shunt.ambient_tolerance_k = reader.maybe_number("ambient_tolerance_k", {0.0, 100.0});
  for (const auto key : {"ambient_c", "ambient_tolerance_k"}) {
    if (reader.has(key) && shunt.tempco_ppm_per_k == 0.0) {
      reader.complain(key, print_text(key) +
                               " changes nothing without a temperature coefficient; add, for example, "
                               "\"tempco_ppm_per_k\": 20, or remove it");
    }
  }
  return shunt;
}

Thermocouple read_thermocouple(ObjectReader& reader) {
  Thermocouple couple;
  const std::string letter = reader.text("letter", "\"letter\": \"K\"");
  if (letter.size() != 1 || std::string_view{"BEJKNRST"}.find(letter) == std::string_view::npos) {
    reader.complain("letter",
                    "\"letter\" is " + print_text(letter) + "; it must be B, E, J, K, N, R, S or T");
  } else {
    couple.letter = letter.front();
  }
  couple.tolerance_class = reader.integer_or("tolerance_class", 1, 3, 2);
  couple.cold_junction = reader.text_or("cold_junction", "");
  return couple;
}

Platinum read_platinum(ObjectReader& reader) {
  Platinum platinum;
  platinum.r0_ohm = reader.number_or("r0_ohm", {1.0, 1e5}, 100.0);
  platinum.tolerance_class = std::string{reader.one_of<std::string_view>("class", kPlatinumClasses, "B")};
  platinum.film = reader.one_of<bool>("build", kBuilds, true);
  platinum.lead_ohm = reader.number_or("lead_ohm", kNotNegative, 0.0);
  // 100 ohm of leads to a Pt100 would read some 250 K too high: a slip of the unit.
  if (platinum.lead_ohm >= platinum.r0_ohm) {
    reader.complain("lead_ohm", "\"lead_ohm\" is " + base::print_number(platinum.lead_ohm) +
                                    ", no less than the thermometer itself; both leads together have "
                                    "tenths of an ohm, or 0 with three or four wires");
  }
  return platinum;
}

Thermistor read_thermistor(ObjectReader& reader) {
  Thermistor thermistor;
  const bool by_beta = reader.has("r25_ohm") || reader.has("beta_k");
  const bool by_three = reader.has("a") || reader.has("b") || reader.has("c");
  if (by_beta == by_three) {
    reader.problem().report(
        reader.place(),
        "a thermistor has \"r25_ohm\" and \"beta_k\", or Steinhart and Hart's \"a\", \"b\" "
        "and \"c\", one of the two");
    return thermistor;
  }
  if (by_beta) {
    thermistor.r25_ohm = reader.number("r25_ohm", kPositive, "\"r25_ohm\": 10000");
    thermistor.beta_k = reader.number("beta_k", {100.0, 20000.0}, "\"beta_k\": 3950");
  } else {
    // 1/T = a + b ln R + c (ln R)^3 with T near 300 K: none of them is beyond some thousandths.
    thermistor.a = reader.number("a", {-0.1, 0.1}, "\"a\": 1.1e-3");
    thermistor.b = reader.number("b", {0.0, 0.1, true}, "\"b\": 2.3e-4");
    thermistor.c = reader.number("c", {-0.01, 0.01}, "\"c\": 9e-8");
  }
  thermistor.tolerance_k = reader.maybe_number("tolerance_k", {0.0, 100.0});
  return thermistor;
}

void refuse_second(ObjectReader& reader) {
  std::string_view first;
  for (const std::string_view key : {"shunt", "thermocouple", "platinum", "thermistor"}) {
    if (!reader.has(key)) continue;
    if (first.empty()) {
      first = key;
      continue;
    }
    reader.complain(key, "a channel has one sensor, " + print_text(first) + " or " + print_text(key) +
                             ", not both; remove one");
  }
}

std::string_view sensor_of(const Conversion& conversion) {
  if (conversion.shunt) return "shunt";
  if (conversion.thermocouple) return "thermocouple";
  if (conversion.platinum) return "platinum thermometer";
  if (conversion.thermistor) return "thermistor";
  return "";
}

}  // namespace

std::string_view meter_unit_wanted(const Channel& channel) {
  const Conversion& conversion = channel.conversion;
  if (conversion.shunt) return "V";
  if (conversion.thermocouple) return conversion.thermocouple->cold_junction.empty() ? "degC" : "V";
  if (conversion.platinum || conversion.thermistor) return "ohm";
  return unit_of(channel.quantity);
}

Conversion read_conversion(ObjectReader& channel) {
  Conversion conversion;
  with_object(channel, "conversion", kConversionForm, [&](ObjectReader& reader) {
    conversion.scale = reader.number_or("scale", document::kAnyNumber, 1.0);
    if (conversion.scale == 0.0) reader.complain("scale", "\"scale\" is 0; every reading would become 0");
    conversion.scale_tolerance_percent = reader.number_or("scale_tolerance_percent", kPercent, 0.0);
    refuse_second(reader);
    with_object(reader, "shunt", kShuntForm,
                [&](ObjectReader& sensor) { conversion.shunt = read_shunt(sensor); });
    with_object(reader, "thermocouple", kThermocoupleForm,
                [&](ObjectReader& sensor) { conversion.thermocouple = read_thermocouple(sensor); });
    with_object(reader, "platinum", kPlatinumForm,
                [&](ObjectReader& sensor) { conversion.platinum = read_platinum(sensor); });
    with_object(reader, "thermistor", kThermistorForm,
                [&](ObjectReader& sensor) { conversion.thermistor = read_thermistor(sensor); });
  });
  return conversion;
}

void check_conversion(ObjectReader& reader, const Channel& channel, std::string_view meter_unit) {
  const std::string sensor{sensor_of(channel.conversion)};
  if (channel.conversion.shunt && channel.quantity != Quantity::current) {
    reader.complain("conversion", "a shunt turns a voltage into a current, but \"quantity\" is " +
                                      std::string{name_of(channel.quantity)} +
                                      "; write current, or remove the shunt");
  }
  if (!sensor.empty() && !channel.conversion.shunt && channel.quantity != Quantity::temperature) {
    reader.complain("conversion", "a " + sensor + " gives a temperature, but \"quantity\" is " +
                                      std::string{name_of(channel.quantity)} +
                                      "; write temperature, or remove the " + sensor);
  }
  if (channel.typed) return;
  const std::string_view wanted = meter_unit_wanted(channel);
  // A written scale may carry a unit: 10 A/V of a current probe.
  const bool scaled = channel.conversion.scale != 1.0 && sensor.empty();
  if (meter_unit == wanted || scaled) return;
  reader.complain(
      "value",
      "the value " + print_text(channel.value) + " comes in " + std::string{meter_unit} + ", but " +
          (sensor.empty() ? "a " + std::string{name_of(channel.quantity)} + " without conversion needs "
                          : std::string{"this conversion starts from "}) +
          std::string{wanted} + "; choose another value, or add the conversion between the two");
}

}  // namespace loadstair::setup
