#include "analysis/base/number.h"
#include "analysis/base/unit.h"
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

constexpr std::array kQuantities = {Choice<Quantity>{"voltage", Quantity::voltage},
                                    Choice<Quantity>{"current", Quantity::current},
                                    Choice<Quantity>{"power", Quantity::power},
                                    Choice<Quantity>{"apparent-power", Quantity::apparent_power},
                                    Choice<Quantity>{"power-factor", Quantity::power_factor},
                                    Choice<Quantity>{"frequency", Quantity::frequency},
                                    Choice<Quantity>{"temperature", Quantity::temperature}};
constexpr std::array kResponses = {Choice<Response>{"dc", Response::dc},
                                   Choice<Response>{"true-rms-ac", Response::true_rms_ac},
                                   Choice<Response>{"true-rms-ac-dc", Response::true_rms_ac_dc},
                                   Choice<Response>{"average-responding", Response::average_responding},
                                   Choice<Response>{"wattmeter", Response::wattmeter}};
// Shares in percent of a reading: beyond all of it nothing was measured.
constexpr Bounds kPercent{0.0, 100.0, false};

void read_range(ObjectReader& reader, Channel& channel) {
  RangeSpec range;
  range.upto = reader.number("upto", kPositive, "\"upto\": 600");
  range.reading_percent = reader.number_or("reading_percent", kPercent, 0.0);
  range.range_percent = reader.number_or("range_percent", kPercent, 0.0);
  range.digits = reader.number_or("digits", kNotNegative, 0.0);
  range.resolution = reader.number_or("resolution", kNotNegative, 0.0);
  range.impedance_ohm = reader.number_or("impedance_ohm", kNotNegative, 0.0);
  range.impedance_tolerance_percent = reader.maybe_number("impedance_tolerance_percent", kPercent);
  if (reader.problem().found()) return;
  if (!channel.ranges.empty() && range.upto <= channel.ranges.back().upto) {
    reader.complain(
        "upto", "the range up to " + base::print_number(range.upto) + " stands after the one up to " +
                    base::print_number(channel.ranges.back().upto) + "; list the ranges from small to large");
  }
  if (range.digits > 0.0 && range.resolution == 0.0) {
    reader.complain("digits",
                    "\"digits\" counts last digits, but \"resolution\" does not say what one is worth; "
                    "add, for example, \"resolution\": 0.1");
  }
  if (range.resolution >= range.upto) {
    reader.complain("resolution",
                    "\"resolution\" is the worth of the last digit; it must be less than \"upto\"");
  }
  // The meter on a shunt is a voltmeter; the shunt's resistance here would be a burden twice.
  constexpr double kLeastOverShunt = 100.0;
  const auto& shunt = channel.conversion.shunt;
  if (shunt && range.impedance_ohm > 0.0 && range.impedance_ohm < kLeastOverShunt * shunt->resistance_ohm) {
    reader.complain("impedance_ohm",
                    "\"impedance_ohm\" is " + base::print_number(range.impedance_ohm) +
                        "; on a shunt it is the input of the meter across it, at least 100 times the "
                        "shunt's " +
                        base::print_number(shunt->resistance_ohm) +
                        " ohm. The shunt is its own burden: write the meter's input, such as 10e6, or remove "
                        "the key");
  }
  if (range.impedance_tolerance_percent && range.impedance_ohm == 0.0) {
    reader.complain("impedance_tolerance_percent",
                    "a tolerance without its \"impedance_ohm\"; add that, or remove it");
  }
  channel.ranges.push_back(range);
}

void check_response(ObjectReader& reader, Channel& channel) {
  const bool power = channel.quantity == Quantity::power;
  if (!reader.has("response")) channel.response = power ? Response::wattmeter : Response::dc;
  if (power != (channel.response == Response::wattmeter) &&
      (power || channel.quantity == Quantity::voltage || channel.quantity == Quantity::current)) {
    reader.complain("response", power ? "a power is read by a wattmeter: write \"response\": \"wattmeter\""
                                      : "only a power has the response wattmeter; write dc, true-rms-ac, "
                                        "true-rms-ac-dc or average-responding");
  }
}

// Where a channel's numbers come from: an instrument's value, or a person.
void read_origin(ObjectReader& reader, const Hookup& hookup, Channel& channel) {
  channel.typed = reader.flag_or("typed", false);
  if (channel.typed) {
    for (const auto key : {"instrument", "value"}) {
      if (reader.has(key)) {
        reader.complain(key,
                        "a typed channel has no " + print_text(key) + "; remove it, or remove \"typed\"");
      }
    }
    return;
  }
  if (!reader.has("instrument")) {
    reader.complain("instrument",
                    "nothing says where this channel's readings come from; add \"instrument\" and "
                    "\"value\", or \"typed\": true for a meter that is read by eye");
    return;
  }
  channel.instrument = reader.text("instrument", "\"instrument\": \"shunt meter\"");
  require_known(reader, "instrument", "instrument", channel.instrument, names_of(hookup.instruments));
  channel.value = reader.text("value", "\"value\": \"voltage\"");
  if (reader.problem().found()) return;
  const Instrument* instrument = hookup.find_instrument(channel.instrument);
  const auto values = names_of(instrument->profile.values);
  if (contains(values, channel.value)) return;
  reader.complain("value", "the profile " + print_text(instrument->profile_name) + " has no value " +
                               print_text(channel.value) + document::suggest(channel.value, values));
}

std::string_view meter_unit_of(const Hookup& hookup, const Channel& channel) {
  const Instrument* instrument = hookup.find_instrument(channel.instrument);
  if (instrument == nullptr) return {};
  for (const auto& value : instrument->profile.values) {
    if (value.name == channel.value) return value.unit;
  }
  return {};
}

void check_other_channels(ObjectReader& reader, const Hookup& hookup, const Channel& channel) {
  require_new(reader, "name", channel.name, names_of(hookup.channels));
  for (const Channel& other : hookup.channels) {
    if (channel.typed || other.instrument != channel.instrument || other.value != channel.value) continue;
    reader.complain("value", "the channel " + print_text(other.name) + " already takes " +
                                 print_text(channel.value) + " of " + print_text(channel.instrument) +
                                 "; one reading belongs to one channel");
  }
}

// Where the book says that its figures hold.
Conditions read_conditions(ObjectReader& reader, const Channel& channel) {
  Conditions conditions;
  constexpr Bounds kCelsius{-60.0, 200.0, false};
  conditions.low_c = reader.maybe_number("low_c", kCelsius);
  conditions.high_c = reader.maybe_number("high_c", kCelsius);
  conditions.percent_of_spec_per_k = reader.maybe_number("percent_of_spec_per_k", {0.0, 1000.0});
  conditions.days = reader.maybe_number("days", {0.0, 36525.0, true});
  conditions.least_percent_of_range = reader.maybe_number("least_percent_of_range", kPercent);
  conditions.least_hz = reader.maybe_number("least_hz", kNotNegative);
  conditions.least_power_factor = reader.maybe_number("least_power_factor", {0.0, 1.0});
  if (conditions.low_c && conditions.high_c && *conditions.low_c >= *conditions.high_c) {
    reader.complain("low_c",
                    "\"low_c\" is not below \"high_c\", so the figures hold nowhere; the two may be "
                    "swapped");
  }
  if (conditions.percent_of_spec_per_k && !conditions.low_c && !conditions.high_c) {
    reader.complain("percent_of_spec_per_k",
                    "beyond which temperatures? add \"low_c\" and \"high_c\", for example 18 and 28");
  }
  if (conditions.least_hz && channel.response == Response::dc) {
    reader.complain("least_hz",
                    "the response dc has no lower end of its band; remove it, or correct "
                    "\"response\"");
  }
  if (conditions.least_hz && channel.band_hz && *conditions.least_hz >= *channel.band_hz) {
    reader.complain("least_hz",
                    "\"least_hz\" is not below \"band_hz\", so the band is empty; the two may be swapped");
  }
  if (conditions.least_power_factor && channel.quantity != Quantity::power) {
    reader.complain("least_power_factor", "a least power factor belongs to a power, but \"quantity\" is " +
                                              std::string{name_of(channel.quantity)} + "; remove it");
  }
  return conditions;
}

// What the meter is, beyond its ranges.
void read_meter(ObjectReader& reader, Channel& channel) {
  channel.band_hz = reader.maybe_number("band_hz", kPositive);
  channel.crest_limit = reader.maybe_number("crest_limit", {1.0, 1000.0});
  with_object(reader, "conditions", kConditionsForm,
              [&](ObjectReader& inner) { channel.conditions = read_conditions(inner, channel); });
  channel.phase_error_deg = reader.maybe_number("phase_error_deg", {0.0, 90.0});
  if (channel.phase_error_deg && channel.quantity != Quantity::power) {
    reader.complain("phase_error_deg",
                    "a phase error between voltage and current belongs to a power, but "
                    "\"quantity\" is " +
                        std::string{name_of(channel.quantity)} + "; remove it");
  }
  if (reader.has("meter")) channel.meter = reader.text("meter", "\"meter\": \"hand meter 2\"");
  if (reader.has("meter") && !channel.typed) {
    reader.complain("meter",
                    "\"meter\" names a meter that is read by eye, but this channel has an "
                    "\"instrument\"; remove one of the two");
  }
}

void read_channel(ObjectReader& reader, Hookup& hookup) {
  Channel channel;
  channel.name = reader.text("name", "\"name\": \"input voltage\"");
  read_origin(reader, hookup, channel);
  channel.quantity = reader.one_of<Quantity>("quantity", kQuantities);
  channel.unit = plain_unit(reader, "unit", reader.text("unit", "\"unit\": \"V\""));
  channel.response = reader.one_of<Response>("response", kResponses, Response::dc);
  if (reader.problem().found()) return;
  if (channel.unit != unit_of(channel.quantity)) {
    reader.complain("unit", "a " + std::string{name_of(channel.quantity)} + " has the unit " +
                                std::string{unit_of(channel.quantity)} + ", not " + channel.unit +
                                "; correct \"unit\" or \"quantity\"");
  }
  check_response(reader, channel);
  channel.conversion = read_conversion(reader);
  for_objects(reader, "ranges", kRangeForm,
              [&](ObjectReader& range, std::size_t) { read_range(range, channel); });
  read_meter(reader, channel);
  channel.low = reader.maybe_number("low", document::kAnyNumber);
  channel.high = reader.maybe_number("high", document::kAnyNumber);
  if (reader.problem().found()) return;
  if (channel.low && channel.high && *channel.low >= *channel.high) {
    reader.complain("low",
                    "\"low\" is not below \"high\", so no value would be plausible; the two may be swapped");
  }
  check_conversion(reader, channel, meter_unit_of(hookup, channel));
  check_other_channels(reader, hookup, channel);
  hookup.channels.push_back(std::move(channel));
}

// After all channels are known: the cold junction is one of them.
void check_cold_junctions(ObjectReader& top, const Hookup& hookup) {
  const auto* list = top.find("channels");
  std::vector<std::string_view> temperatures;
  for (const Channel& channel : hookup.channels) {
    if (channel.quantity == Quantity::temperature) temperatures.push_back(channel.name);
  }
  for (std::size_t i = 0; i < hookup.channels.size(); ++i) {
    const auto& couple = hookup.channels[i].conversion.thermocouple;
    if (!couple || couple->cold_junction.empty()) continue;
    const auto* where = document::find(list->items[i], "conversion/thermocouple/cold_junction");
    if (couple->cold_junction == hookup.channels[i].name) {
      top.problem().report(where->place,
                           "a thermocouple cannot be its own cold junction; name another channel");
    } else if (!contains(temperatures, couple->cold_junction)) {
      top.problem().report(where->place, "there is no temperature channel " +
                                             print_text(couple->cold_junction) +
                                             document::suggest(couple->cold_junction, temperatures));
    }
  }
}

}  // namespace

std::string_view unit_of(Quantity quantity) {
  switch (quantity) {
    case Quantity::voltage:
      return "V";
    case Quantity::current:
      return "A";
    case Quantity::power:
      return "W";
    case Quantity::apparent_power:
      return "VA";
    case Quantity::power_factor:
      return "1";
    case Quantity::frequency:
      return "Hz";
    case Quantity::temperature:
      return "degC";
  }
  return "";
}

std::string_view name_of(Quantity quantity) {
  for (const auto& choice : kQuantities) {
    if (choice.value == quantity) return choice.word;
  }
  return "";
}

std::string_view name_of(Response response) {
  for (const auto& choice : kResponses) {
    if (choice.value == response) return choice.word;
  }
  return "";
}

void read_channels(ObjectReader& top, Hookup& hookup) {
  (void)top.required(
      "channels", Type::list,
      R"("channels": [{"name": "input voltage", "typed": true, "quantity": "voltage", "unit": "V"}])");
  for_objects(top, "channels", kChannelForm,
              [&](ObjectReader& reader, std::size_t) { read_channel(reader, hookup); });
  if (!top.problem().found()) check_cold_junctions(top, hookup);
}

}  // namespace loadstair::setup
