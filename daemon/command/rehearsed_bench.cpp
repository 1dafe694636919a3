#include "daemon/command/rehearsed_bench.h"

#include <algorithm>
#include <array>
#include <filesystem>

#include "analysis/base/unit.h"
#include "daemon/sequencer/typed_value.h"

namespace loadstair::command {
namespace {

using setup::Hookup;

/// Where a channel sits on the simulated bench.
struct Place {
  rehearsal::Quantity quantity = rehearsal::Quantity::voltage;
  rehearsal::Port port = rehearsal::Port::input;
  rehearsal::Node node = rehearsal::Node::inner;
};

void set_if(const std::map<std::string, double>& from, const std::string& key, double& to) {
  if (const auto found = from.find(key); found != from.end()) to = found->second;
}

rehearsal::PlantParameters plant_of(const setup::RehearsalSection& section) {
  rehearsal::PlantParameters plant;
  auto& converter = plant.converter;
  converter.kind =
      section.kind == "dcdc" ? rehearsal::ConverterKind::dcdc : rehearsal::ConverterKind::inverter;
  set_if(section.converter, "no_load_w", converter.loss.no_load_w);
  set_if(section.converter, "linear", converter.loss.linear);
  set_if(section.converter, "quadratic_per_w", converter.loss.quadratic_per_w);
  set_if(section.converter, "resistance_rise_per_k", converter.loss.resistance_rise_per_k);
  set_if(section.converter, "standby_w", converter.loss.standby_w);
  set_if(section.converter, "output_voltage_v", converter.output.nominal_voltage_v);
  set_if(section.converter, "output_impedance_ohm", converter.output.impedance_ohm);
  set_if(section.converter, "soft_start_s", converter.output.soft_start_s);
  set_if(section.converter, "sense_threshold_v", converter.overload.threshold_v);
  set_if(section.converter, "sense_ohm", converter.overload.sense_ohm);
  set_if(section.converter, "fold_back", converter.overload.fold_back);
  set_if(section.converter, "least_input_voltage_v", converter.input.least_voltage_v);
  converter.overload.sense = section.sense == "rms"       ? rehearsal::SenseKind::rms
                             : section.sense == "average" ? rehearsal::SenseKind::average
                                                          : rehearsal::SenseKind::peak;
  set_if(section.source, "resistance_ohm", plant.source.resistance_ohm);
  set_if(section.source, "current_limit_a", plant.source.current_limit_a);
  set_if(section.source, "lead_ohm", plant.input_leads.outer_ohm);
  set_if(section.load, "greatest_current_a", plant.load.greatest_current_a);
  set_if(section.load, "lead_ohm", plant.output_leads.outer_ohm);
  auto& thermal = converter.thermal;
  set_if(section.thermal, "ambient_c", plant.ambient_c);
  set_if(section.thermal, "ambient_drift_k_per_h", plant.ambient_drift_k_per_h);
  set_if(section.thermal, "junction_to_case_k_per_w", thermal.junction_to_case_k_per_w);
  set_if(section.thermal, "case_to_air_k_per_w", thermal.case_to_air_k_per_w);
  set_if(section.thermal, "case_to_air_fan_k_per_w", thermal.case_to_air_fan_k_per_w);
  set_if(section.thermal, "junction_time_s", thermal.junction_time_s);
  set_if(section.thermal, "case_time_s", thermal.case_time_s);
  set_if(section.thermal, "fan_starts_c", thermal.fan_starts_c);
  set_if(section.thermal, "fan_stops_c", thermal.fan_stops_c);
  set_if(section.thermal, "fan_power_w", thermal.fan_power_w);
  auto& output = converter.output;
  set_if(section.waveform, "frequency_hz", output.frequency_hz);
  set_if(section.waveform, "dc_offset_v", output.dc_offset_v);
  set_if(section.waveform, "third_share", output.harmonics[0].share);
  set_if(section.waveform, "fifth_share", output.harmonics[1].share);
  set_if(section.waveform, "seventh_share", output.harmonics[2].share);
  set_if(section.waveform, "residue_share", output.residue_share);
  set_if(section.waveform, "ripple_share", converter.input.ripple_share);
  if (const auto found = section.waveform.find("residue_ratio"); found != section.waveform.end()) {
    output.residue_ratio = static_cast<int>(found->second);
  }
  return plant;
}

void add_loads(const Hookup& hookup, rehearsal::PlantParameters& plant) {
  for (const auto& item : hookup.loads) {
    if (item.kind == "lamp") {
      plant.lamps.count = item.count;
      plant.lamps.rated_power_w = item.power_w;
      plant.lamps.rated_voltage_v = item.voltage_v;
      plant.lamps.cold_ratio = item.cold_ratio;
    } else {
      for (int i = 0; i < item.count; ++i) {
        plant.resistors_ohm.push_back(item.voltage_v * item.voltage_v / item.power_w);
      }
    }
  }
}

rehearsal::Response response_of(setup::Response response) {
  switch (response) {
    case setup::Response::true_rms_ac:
      return rehearsal::Response::true_rms_ac;
    case setup::Response::true_rms_ac_dc:
    case setup::Response::wattmeter:
      return rehearsal::Response::true_rms_ac_dc;
    case setup::Response::average_responding:
      return rehearsal::Response::average_responding;
    case setup::Response::dc:
      break;
  }
  return rehearsal::Response::dc;
}

rehearsal::Node node_of(const setup::Port& port) {
  if (port.voltmeter == setup::VoltmeterSide::outer) return rehearsal::Node::outer;
  return port.sensed.value_or(false) ? rehearsal::Node::terminals : rehearsal::Node::inner;
}

base::Outcome<Place> place_of(const Hookup& hookup, const setup::Channel& channel) {
  for (const auto& point : hookup.temperatures) {
    if (point.channel == channel.name) return Place{rehearsal::Quantity::case_temperature};
    if (point.ambient_channel == channel.name) return Place{rehearsal::Quantity::ambient_temperature};
  }
  for (const auto& port : hookup.ports) {
    Place place;
    place.port = port.direction == setup::Direction::input ? rehearsal::Port::input : rehearsal::Port::output;
    place.node = node_of(port);
    if (port.voltage == channel.name) return place;
    place.quantity = rehearsal::Quantity::current;
    if (port.current == channel.name) return place;
    place.quantity = rehearsal::Quantity::power;
    if (port.power == channel.name) return place;
    place.quantity = rehearsal::Quantity::power_factor;
    if (port.power_factor == channel.name) return place;
  }
  Place place;
  place.port = rehearsal::Port::output;
  if (channel.quantity == setup::Quantity::frequency)
    place.quantity = rehearsal::Quantity::frequency;
  else if (channel.quantity == setup::Quantity::power_factor)
    place.quantity = rehearsal::Quantity::power_factor;
  else
    return base::Refusal{hookup.file,
                         "the channel \"" + channel.name +
                             "\" is wired to no port and no temperature point, so the rehearsal cannot "
                             "tell what it would measure"};
  return place;
}

/// IEC 60751:2008, table 3: half-width at 0 degC in K, and its growth per degC.
struct PlatinumClass {
  const char* name;
  double tolerance_k, per_k;
};
constexpr std::array<PlatinumClass, 4> kPlatinumClasses = {
    {{"AA", 0.1, 0.0017}, {"A", 0.15, 0.002}, {"B", 0.3, 0.005}, {"C", 0.6, 0.01}}};

std::optional<rehearsal::ResistanceSensor> sensor_of(const setup::Conversion& conversion) {
  rehearsal::ResistanceSensor sensor;
  if (const auto& platinum = conversion.platinum) {
    sensor.r0_ohm = platinum->r0_ohm;
    sensor.lead_ohm = platinum->lead_ohm;
    for (const auto& one : kPlatinumClasses) {
      if (platinum->tolerance_class != one.name) continue;
      sensor.tolerance_k = one.tolerance_k;
      sensor.tolerance_per_k = one.per_k;
    }
    return sensor;
  }
  if (const auto& thermistor = conversion.thermistor) {
    sensor.r25_ohm = thermistor->r25_ohm;
    sensor.beta_k = thermistor->beta_k;
    sensor.a = thermistor->a;
    sensor.b = thermistor->b;
    sensor.c = thermistor->c;
    sensor.tolerance_k = thermistor->tolerance_k.value_or(0.0);
    return sensor;
  }
  return std::nullopt;
}

rehearsal::MeterFunction function_of(const setup::Channel& channel, const Place& place,
                                     const setup::RehearsalSection& section) {
  rehearsal::MeterFunction function;
  function.name = channel.typed ? "reading" : channel.value;
  function.quantity = place.quantity;
  function.port = place.port;
  function.node = place.node;
  function.response = response_of(channel.response);
  double noise_share = 1e-5;
  set_if(section.meters, "noise_share", noise_share);
  for (const auto& range : channel.ranges) {
    rehearsal::MeterRange as_rehearsed;
    as_rehearsed.full_scale = range.upto;
    as_rehearsed.digit = range.resolution;
    as_rehearsed.reading_percent = range.reading_percent;
    as_rehearsed.range_percent = range.range_percent;
    as_rehearsed.digits = range.digits;
    if (place.quantity == rehearsal::Quantity::current && !channel.conversion.shunt) {
      as_rehearsed.burden_ohm = range.impedance_ohm;
    }
    if (place.quantity == rehearsal::Quantity::voltage) function.impedance_ohm = range.impedance_ohm;
    function.burden_tolerance_percent = range.impedance_tolerance_percent.value_or(30.0);
    function.ranges.push_back(as_rehearsed);
    if (function.noise == 0.0) function.noise = range.upto * noise_share;  // as on the smallest range
  }
  if (channel.conversion.shunt) {
    const auto& shunt = *channel.conversion.shunt;
    function.shunt = rehearsal::Shunt{shunt.resistance_ohm, shunt.tolerance_percent, shunt.tempco_ppm_per_k,
                                      shunt.rise_k_per_w};
  }
  function.sensor = sensor_of(channel.conversion);
  function.scale = channel.conversion.scale;
  function.scale_tolerance_percent = channel.conversion.scale_tolerance_percent;
  return function;
}

/// "OUTP?" answers and "OUTP ON" turns: a switch's command as the rehearsal takes it.
rehearsal::ScpiSetting switch_of(const instrument::Profile& profile, rehearsal::Knob knob) {
  rehearsal::ScpiSetting setting;
  setting.knob = knob;
  if (!profile.on_commands.empty()) {
    const std::string& on = profile.on_commands.back();
    setting.command = on.substr(0, on.rfind(' ')) + " {value}";
  }
  if (profile.safe) setting.query = profile.safe->confirm_query;
  return setting;
}

void add_control(const setup::Control& control, const setup::Instrument& instrument,
                 rehearsal::InstrumentDescription& description) {
  const bool source = control.role == "source";
  const bool converter = control.role == "converter";
  description.settings.push_back(switch_of(instrument.profile, converter ? rehearsal::Knob::converter
                                                               : source  ? rehearsal::Knob::source_output
                                                                         : rehearsal::Knob::load_input));
  for (const auto& setting : instrument.profile.settings) {
    rehearsal::ScpiSetting as_rehearsed;
    as_rehearsed.command = setting.command;
    as_rehearsed.query = setting.readback;
    as_rehearsed.knob = rehearsal::Knob::none;
    if (source && setting.name == "voltage") as_rehearsed.knob = rehearsal::Knob::source_voltage;
    if (!source && setting.name == "power") as_rehearsed.knob = rehearsal::Knob::load_power;
    if (!source && setting.name == "current") as_rehearsed.knob = rehearsal::Knob::load_current;
    if (!source && setting.name == "resistance") as_rehearsed.knob = rehearsal::Knob::load_resistance;
    description.settings.push_back(as_rehearsed);
  }
}

/// A pattern such as "T1 {value} {unit}" cut at its value and unit; the rehearsal prints what the profile
/// reads.
rehearsal::LineField line_of(const instrument::ProfileValue& value, const setup::Channel& channel) {
  rehearsal::LineField field;
  field.function = value.name;
  const std::string& pattern = value.line_pattern;
  const auto at = pattern.find("{value}");
  const auto unit_at = pattern.find("{unit}");
  field.before = pattern.substr(0, at);
  const bool celsius = value.unit == "degC";
  const bool millivolt = channel.conversion.shunt.has_value();
  field.scale = millivolt ? 1e-3 : 1.0;
  const std::string printed_unit = celsius ? "C" : millivolt ? "m" + value.unit : value.unit;
  if (unit_at != std::string::npos) {
    const auto between = at + std::string{"{value}"}.size();
    const std::string gap = pattern.substr(between, unit_at - between);
    const std::string tail = pattern.substr(unit_at + std::string{"{unit}"}.size());
    field.after = gap + printed_unit + tail;
    field.turned_after = gap + (celsius ? "mV" : "kohm") + tail;
  }
  field.turned_scale = 1.0;
  return field;
}

rehearsal::ScopeDescription scope_of(const setup::CaptureSource& capture, const Hookup& hookup,
                                     const std::string& folder, const rehearsal::PlantParameters& plant) {
  rehearsal::ScopeDescription scope;
  scope.folder = folder;
  const setup::Port* port = hookup.find_port(capture.port);
  const bool input = port != nullptr && port->direction == setup::Direction::input;
  const bool ac = port != nullptr && port->kind == setup::PortKind::ac;
  rehearsal::ScopeChannel voltage;
  voltage.name = capture.voltage_column.empty() ? "voltage" : capture.voltage_column;
  voltage.unit = "V";
  voltage.signal = input ? rehearsal::ScopeSignal::input_voltage : rehearsal::ScopeSignal::output_voltage;
  voltage.full_scale = 2.0 * (input ? 400.0 : plant.converter.output.nominal_voltage_v);
  voltage.gain_percent = capture.voltage_gain_percent;
  voltage.offset_percent = 0.05;
  rehearsal::ScopeChannel current;
  current.name = capture.current_column.empty() ? "current" : capture.current_column;
  current.unit = "A";
  current.signal = input ? rehearsal::ScopeSignal::input_current : rehearsal::ScopeSignal::output_current;
  current.full_scale = plant.load.greatest_current_a;
  current.gain_percent = capture.current_gain_percent;
  current.offset_percent = 0.05;
  current.delay_s = capture.delay_tolerance_s;
  scope.channels = {voltage, current};
  if (ac) {
    scope.length_s = 12.5 / plant.converter.output.frequency_hz;
    // Five samples a cycle of the usual 20 kHz residue, so that it is seen and not folded down.
    scope.interval_s = 1.0 / plant.converter.output.frequency_hz / 2000.0;
  } else {
    scope.length_s = 2e-3;
    scope.interval_s = 2e-7;
  }
  return scope;
}

rehearsal::InstrumentDescription instrument_of(const setup::Instrument& instrument, const Hookup& hookup,
                                               const RehearsalChoice& choice) {
  rehearsal::InstrumentDescription description;
  description.name = instrument.name;
  description.service = instrument.profile.dialect == instrument::Dialect::text_lines
                            ? rehearsal::Service::text_lines
                            : rehearsal::Service::scpi;
  description.baud = instrument.link.baud;
  if (choice.folder.empty()) {
    description.link = rehearsal::LinkKind::memory;
    description.paced = instrument.link.kind == setup::LinkKind::serial;
  } else {
    description.link =
        instrument.link.kind == setup::LinkKind::tcp ? rehearsal::LinkKind::tcp : rehearsal::LinkKind::pty;
  }
  description.identity = instrument.identity + ",rehearsed,1.0";
  description.terminator = instrument.profile.terminator;
  description.function_query = instrument.profile.function_query;
  description.function_reply = instrument.profile.function_reply;
  description.turned_reply = "RES";  // what a knob that somebody turned would say
  description.meter.name = instrument.name;
  description.meter.update_period_s = instrument.update_s;
  description.meter.integration_s = instrument.integration_s > 0 ? instrument.integration_s : 0.02;
  description.meter.delay_s = instrument.delay_s;
  if (!instrument.profile.overload_words.empty()) {
    description.overload_word = instrument.profile.overload_words.front();
  }
  for (const auto& control : hookup.controls) {
    if (control.instrument == instrument.name) add_control(control, instrument, description);
  }
  return description;
}

/// Functions that a profile names and no channel uses still stand in the reply: they are shown without error.
void add_queries(const setup::Instrument& instrument, const Hookup& hookup,
                 rehearsal::InstrumentDescription& description) {
  rehearsal::Port port = rehearsal::Port::output;
  for (const auto& control : hookup.controls) {
    if (control.instrument == instrument.name && control.role == "source") port = rehearsal::Port::input;
  }
  for (const auto& query : instrument.profile.queries) {
    for (const auto& value : query.values) {
      const bool known = std::any_of(description.meter.functions.begin(), description.meter.functions.end(),
                                     [&](const auto& function) { return function.name == value; });
      if (known || value.empty()) continue;
      rehearsal::MeterFunction function;
      function.name = value;
      function.port = port;
      function.node = rehearsal::Node::outer;
      function.response =
          port == rehearsal::Port::output ? rehearsal::Response::true_rms_ac_dc : rehearsal::Response::dc;
      if (value.find("current") != std::string::npos) function.quantity = rehearsal::Quantity::current;
      if (value == "power") function.quantity = rehearsal::Quantity::power;
      if (value == "power factor") function.quantity = rehearsal::Quantity::power_factor;
      if (value == "frequency") function.quantity = rehearsal::Quantity::frequency;
      description.meter.functions.push_back(function);
    }
    description.queries.push_back({query.text, query.values});
  }
}

}  // namespace

std::string rehearsed_action(const setup::Step& step, const std::string& text) {
  return text == step.prompt ? step.hand_action : text == step.rewire ? step.rewire_action : std::string{};
}

base::Outcome<rehearsal::BenchDescription> describe_rehearsal(const Hookup& hookup,
                                                              const RehearsalChoice& choice) {
  if (!hookup.rehearsal) {
    return base::Refusal{hookup.file, "has no \"rehearsal\" section, so there is nothing to simulate"};
  }
  const auto& section = *hookup.rehearsal;
  rehearsal::BenchDescription bench;
  bench.plant = plant_of(section);
  add_loads(hookup, bench.plant);
  set_if(section.source, "voltage_v", bench.at_start.source_voltage_v);
  bench.seed = choice.seed;
  bench.run = choice.run;
  bench.folder = choice.folder;
  bench.log_path = choice.log_path;
  bench.faults = choice.faults;
  double look_s = 0.3;
  double type_s = 0.5;
  set_if(section.person, "look_s", look_s);
  set_if(section.person, "type_s", type_s);

  for (const auto& instrument : hookup.instruments) {
    auto description = instrument_of(instrument, hookup, choice);
    for (const auto& channel : hookup.channels) {
      if (channel.typed || channel.instrument != instrument.name) continue;
      const auto place = place_of(hookup, channel);
      if (!place) return place.refusal();
      description.meter.functions.push_back(function_of(channel, *place, section));
      description.meter.power_from_circuits |= channel.response == setup::Response::wattmeter;
      bench.circuits.push_back({channel.name, instrument.name, channel.value});
      for (const auto& value : instrument.profile.values) {
        if (value.name == channel.value && description.service == rehearsal::Service::text_lines) {
          description.lines.push_back({line_of(value, channel)});
        }
      }
    }
    if (description.service == rehearsal::Service::scpi) add_queries(instrument, hookup, description);
    for (const auto& capture : hookup.captures) {
      if (capture.instrument != instrument.name) continue;
      description.scope = scope_of(capture, hookup, choice.captures, bench.plant);
      description.link = rehearsal::LinkKind::none;
    }
    bench.instruments.push_back(std::move(description));
  }
  for (const auto& channel : hookup.channels) {
    if (!channel.typed) continue;
    const auto place = place_of(hookup, channel);
    if (!place) return place.refusal();
    rehearsal::InstrumentDescription meter;
    meter.name = "meter of " + channel.name;
    meter.service = rehearsal::Service::display;
    meter.link = rehearsal::LinkKind::none;
    meter.meter.name = meter.name;
    meter.meter.update_period_s = 0.3;
    meter.meter.integration_s = 0.1;
    meter.meter.functions.push_back(function_of(channel, *place, section));
    bench.instruments.push_back(meter);
    bench.typed.push_back(
        {channel.name, meter.name, "reading", sequencer::meter_unit(channel), 1.0, look_s, type_s});
  }
  return bench;
}

}  // namespace loadstair::command
