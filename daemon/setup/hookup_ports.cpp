#include "daemon/setup/hookup_parts.h"
#include "daemon/setup/reading.h"

namespace loadstair::setup {
namespace {

using document::Choice;
using document::kNotNegative;
using document::kPositive;
using document::ObjectReader;
using document::print_text;

constexpr std::array kDirections = {Choice<Direction>{"input", Direction::input},
                                    Choice<Direction>{"output", Direction::output}};
constexpr std::array kKinds = {Choice<PortKind>{"dc", PortKind::dc}, Choice<PortKind>{"ac", PortKind::ac}};
constexpr std::array kSides = {Choice<VoltmeterSide>{"converter", VoltmeterSide::converter},
                               Choice<VoltmeterSide>{"outer", VoltmeterSide::outer}};

// A meter that cannot see what the port carries would show a number all the same.
void check_response(ObjectReader& reader, std::string_view key, const Channel& channel, PortKind kind) {
  if (channel.quantity != Quantity::voltage && channel.quantity != Quantity::current) return;
  const bool sees_dc = channel.response == Response::dc || channel.response == Response::true_rms_ac_dc;
  const bool sees_ac = channel.response != Response::dc;
  if (kind == PortKind::ac ? sees_ac : sees_dc) return;
  reader.complain(key, "the channel " + print_text(channel.name) + " has the response " +
                           std::string{name_of(channel.response)} + ", which does not see " +
                           (kind == PortKind::ac ? "AC; an ac port needs true-rms-ac, true-rms-ac-dc or "
                                                   "average-responding"
                                                 : "DC; a dc port needs dc or true-rms-ac-dc"));
}

std::string read_channel_of(ObjectReader& reader, const Hookup& hookup, const Port& port,
                            std::string_view key, Quantity wanted) {
  std::string name = reader.text_or(key, "");
  if (!reader.has(key) || reader.problem().found()) return name;
  require_known(reader, key, "channel", name, names_of(hookup.channels));
  const Channel* channel = hookup.find_channel(name);
  if (channel == nullptr) return name;
  if (channel->quantity != wanted) {
    reader.complain(key, "the channel " + print_text(name) + " is a " +
                             std::string{name_of(channel->quantity)} + ", but " + print_text(key) +
                             " takes a " + std::string{name_of(wanted)} + "; name another channel");
  }
  check_response(reader, key, *channel, port.kind);
  return name;
}

void read_port_channels(ObjectReader& reader, const Hookup& hookup, Port& port) {
  port.voltage = read_channel_of(reader, hookup, port, "voltage", Quantity::voltage);
  port.current = read_channel_of(reader, hookup, port, "current", Quantity::current);
  port.power = read_channel_of(reader, hookup, port, "power", Quantity::power);
  port.power_factor = read_channel_of(reader, hookup, port, "power_factor", Quantity::power_factor);
  port.power_factor_low = reader.maybe_number("power_factor_low", {0.0, 1.0, true});
  if (port.power.empty() && (port.voltage.empty() || port.current.empty())) {
    reader.problem().report(reader.place(),
                            "a port needs a \"power\" channel, or a \"voltage\" and a \"current\" channel");
  }
  if (port.kind == PortKind::dc) {
    for (const auto key : {"power_factor", "power_factor_low"}) {
      if (reader.has(key))
        reader.complain(key, "a dc port has no power factor; remove it, or write \"kind\": \"ac\"");
    }
  }
  if (!port.power_factor.empty() && port.power_factor_low) {
    reader.complain("power_factor_low", "the power factor is read and declared at once; keep one of the two");
  }
}

void check_channels_free(ObjectReader& reader, const Hookup& hookup, const Port& port) {
  for (const Port& other : hookup.ports) {
    for (const auto& [key, name] :
         {std::pair{"voltage", port.voltage}, std::pair{"current", port.current},
          std::pair{"power", port.power}, std::pair{"power_factor", port.power_factor}}) {
      if (name.empty()) continue;
      if (name != other.voltage && name != other.current && name != other.power && name != other.power_factor)
        continue;
      reader.complain(key, "the channel " + print_text(name) + " already belongs to port " +
                               print_text(other.name) + "; a meter sits in one place");
    }
  }
}

void read_port(ObjectReader& reader, Hookup& hookup) {
  Port port;
  port.name = reader.text("name", "\"name\": \"input\"");
  require_new(reader, "name", port.name, names_of(hookup.ports));
  port.direction = reader.one_of<Direction>("direction", kDirections);
  port.kind = reader.one_of<PortKind>("kind", kKinds);
  port.counted = reader.flag_or("counted", true);
  if (reader.problem().found()) return;
  read_port_channels(reader, hookup, port);
  check_channels_free(reader, hookup, port);
  port.voltmeter = reader.one_of<VoltmeterSide>("voltmeter", kSides, VoltmeterSide::converter);
  port.sensed = reader.maybe_flag("sensed");
  // A thousand ohms is no lead; it is milliohms written without their unit.
  port.lead_resistance_ohm = reader.maybe_number("lead_resistance_ohm", {0.0, 1000.0});
  port.lead_tolerance_percent = reader.number_or("lead_tolerance_percent", {0.0, 100.0}, 30.0);
  port.ripple_current_rms_a = reader.maybe_number("ripple_current_rms_a", kNotNegative);
  port.source_resistance_ohm = reader.maybe_number("source_resistance_ohm", kNotNegative);
  port.live = reader.flag_or("live", false);
  if (reader.has("lead_tolerance_percent") && !port.lead_resistance_ohm) {
    reader.complain("lead_tolerance_percent",
                    "a tolerance without its \"lead_resistance_ohm\"; add that, or remove it");
  }
  hookup.ports.push_back(std::move(port));
}

}  // namespace

void read_ports(ObjectReader& top, Hookup& hookup) {
  for_objects(top, "ports", kPortForm, [&](ObjectReader& reader, std::size_t) { read_port(reader, hookup); });
}

}  // namespace loadstair::setup
