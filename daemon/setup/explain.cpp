#include "daemon/setup/explain.h"

#include <algorithm>
#include <cmath>

#include "analysis/base/number.h"
#include "daemon/setup/hookup_parts.h"

namespace loadstair::setup {
namespace {

std::string number(double value) {
  return base::print_number(value);
}
std::string count(std::size_t n) {
  return base::print_integer(static_cast<std::int64_t>(n));
}

std::string describe(const LinkChoice& link) {
  switch (link.kind) {
    case LinkKind::serial:
      return "serial " + link.path + " at " + base::print_integer(link.baud) + " baud";
    case LinkKind::tcp:
      return "TCP " + link.host + ":" + base::print_integer(link.port);
    case LinkKind::folder:
      return "files in " + link.path;
  }
  return "";
}

std::string describe(Isolation isolation) {
  switch (isolation) {
    case Isolation::isolated:
      return "isolated";
    case Isolation::battery:
      return "on battery";
    case Isolation::earthed:
      return "tied to earth";
    case Isolation::unknown:
      return "isolation not declared";
  }
  return "";
}

std::string describe(const Platinum& platinum) {
  std::string text = ", platinum of " + number(platinum.r0_ohm) + " ohm at 0 degC, class " +
                     platinum.tolerance_class + (platinum.film ? ", film" : ", wire-wound");
  if (platinum.lead_ohm > 0.0) text += ", two wires of " + number(platinum.lead_ohm) + " ohm together";
  return text;
}

std::string describe(const Thermistor& thermistor) {
  std::string text = ", thermistor ";
  if (thermistor.r25_ohm > 0.0) {
    text += "of " + number(thermistor.r25_ohm) + " ohm at 25 degC, beta " + number(thermistor.beta_k) + " K";
  } else {
    text += "by Steinhart and Hart's coefficients";
  }
  return text + (thermistor.tolerance_k ? " within " + number(*thermistor.tolerance_k) + " K"
                                        : ", tolerance not declared");
}

std::string describe_conversion(const Conversion& conversion) {
  if (conversion.shunt) return ", through a shunt of " + number(conversion.shunt->resistance_ohm) + " ohm";
  if (conversion.thermocouple) {
    return std::string{", thermocouple type "} + conversion.thermocouple->letter +
           (conversion.thermocouple->cold_junction.empty()
                ? ", reader compensates"
                : ", cold junction " + conversion.thermocouple->cold_junction);
  }
  if (conversion.platinum) return describe(*conversion.platinum);
  if (conversion.thermistor) return describe(*conversion.thermistor);
  if (conversion.scale != 1.0) return ", times " + number(conversion.scale);
  return "";
}

// Of the meter's own scale, which "upto" is written in.
std::string_view unit_of_ranges(const Hookup& hookup, const Channel& channel) {
  const Instrument* instrument = hookup.find_instrument(channel.instrument);
  if (instrument != nullptr) {
    for (const auto& value : instrument->profile.values) {
      if (value.name == channel.value) return value.unit;
    }
  }
  return meter_unit_wanted(channel);
}

// "18 to 28 degC", "from 45 Hz", "up to 1000 Hz".
std::string span(const std::optional<double>& low, const std::optional<double>& high, std::string_view unit) {
  const std::string ending = " " + std::string{unit};
  if (low && high) return "from " + number(*low) + " to " + number(*high) + ending;
  return low ? "from " + number(*low) + ending : "up to " + number(*high) + ending;
}

std::string describe_conditions(const Channel& channel) {
  const Conditions& conditions = channel.conditions;
  std::vector<std::string> holds;
  if (conditions.low_c || conditions.high_c) {
    holds.push_back(span(conditions.low_c, conditions.high_c, "degC") +
                    (conditions.percent_of_spec_per_k ? " (" + number(*conditions.percent_of_spec_per_k) +
                                                            " % of it more for each K beyond)"
                                                      : ""));
  }
  if (conditions.days) holds.push_back("for " + number(*conditions.days) + " days");
  if (conditions.least_percent_of_range)
    holds.push_back("from " + number(*conditions.least_percent_of_range) + " % of a range");
  if (conditions.least_hz || channel.band_hz)
    holds.push_back(span(conditions.least_hz, channel.band_hz, "Hz"));
  if (conditions.least_power_factor)
    holds.push_back("from a power factor of " + number(*conditions.least_power_factor));
  if (channel.crest_limit) holds.push_back("up to a crest factor of " + number(*channel.crest_limit));
  std::string line;
  for (const std::string& one : holds) line += (line.empty() ? "; accuracy holds " : ", ") + one;
  return line;
}

std::string describe(const Hookup& hookup, const Channel& channel) {
  std::string line =
      "channel " + channel.name + ": " + std::string{name_of(channel.quantity)} + " in " + channel.unit;
  line += channel.typed ? ", typed by a person" : ", " + channel.value + " of " + channel.instrument;
  if (!channel.meter.empty()) line += " from " + channel.meter;
  line += describe_conversion(channel.conversion);
  if (channel.phase_error_deg)
    line += ", phase error within " + number(*channel.phase_error_deg) + " degrees";
  if (channel.ranges.empty()) return line + "; accuracy not declared";
  line += "; ranges up to";
  for (const RangeSpec& range : channel.ranges) {
    line += (&range == &channel.ranges.front() ? " " : ", ") + number(range.upto);
  }
  return line + " " + std::string{unit_of_ranges(hookup, channel)} + describe_conditions(channel);
}

std::string describe(const CaptureSource& capture) {
  std::string line = "capture of port " + capture.port + " by " + capture.instrument + ":";
  if (!capture.voltage_column.empty()) line += " voltage in column " + capture.voltage_column;
  if (!capture.current_column.empty()) {
    line += (capture.voltage_column.empty() ? " current in column " : ", current in column ") +
            capture.current_column;
  }
  if (capture.current_delay_s != 0.0) {
    line += ", the current " + number(std::fabs(capture.current_delay_s)) + " s " +
            (capture.current_delay_s > 0.0 ? "late" : "early");
  }
  return line + (capture.deskewed.empty() ? "" : ", deskewed on " + capture.deskewed);
}

std::string describe(const Port& port) {
  std::string line = "port " + port.name + ": " + (port.kind == PortKind::ac ? "ac " : "dc ") +
                     (port.direction == Direction::input ? "input" : "output");
  for (const auto& [what, name] :
       {std::pair{"voltage", port.voltage}, std::pair{"current", port.current},
        std::pair{"power", port.power}, std::pair{"power factor", port.power_factor}}) {
    if (!name.empty()) line += std::string{", "} + what + " from " + name;
  }
  line += port.voltmeter == VoltmeterSide::converter ? "; voltmeter on the converter's side of the ammeter"
                                                     : "; voltmeter outside the ammeter";
  if (port.sensed) line += *port.sensed ? ", sensed at the terminals" : ", not sensed at the terminals";
  if (port.lead_resistance_ohm) line += ", leads " + number(*port.lead_resistance_ohm) + " ohm";
  if (!port.counted) line += ", not counted in the efficiency";
  if (port.live) line += ", LIVE";
  return line;
}

}  // namespace

std::string_view name_of(Severity severity) {
  switch (severity) {
    case Severity::error:
      return "error";
    case Severity::warning:
      return "warning";
    case Severity::note:
      return "note";
  }
  return "";
}

std::vector<std::string> explain(const Hookup& hookup) {
  std::vector<std::string> lines = {"bench " + hookup.bench + ": " + count(hookup.instruments.size()) +
                                    " instruments, " + count(hookup.channels.size()) + " channels, " +
                                    count(hookup.ports.size()) + " ports"};
  for (const Instrument& one : hookup.instruments) {
    lines.push_back("instrument " + one.name + ": " + one.profile_name + ", " + describe(one.link) + ", " +
                    describe(one.isolation) +
                    (one.calibration_due.empty() ? "" : ", calibration due " + one.calibration_due));
  }
  for (const Channel& channel : hookup.channels) lines.push_back(describe(hookup, channel));
  for (const Port& port : hookup.ports) lines.push_back(describe(port));
  for (const Control& control : hookup.controls) {
    lines.push_back("control " + control.name + ": " + control.instrument + ", the " + control.role);
  }
  for (const CaptureSource& capture : hookup.captures) lines.push_back(describe(capture));
  return lines;
}

std::vector<GuardForecast> forecast_guards(const Stair& stair, const Hookup& hookup) {
  std::vector<GuardForecast> forecasts;
  for (const Guard& guard : stair.guards) {
    GuardForecast forecast;
    forecast.name = guard.name;
    const Channel* channel = hookup.find_channel(guard.channel);
    const Instrument* instrument = channel == nullptr ? nullptr : hookup.find_instrument(channel->instrument);
    if (instrument != nullptr) {
      const bool asked = instrument->profile.dialect == instrument::Dialect::scpi;
      const double period_s =
          asked || instrument->update_s == 0.0 ? instrument->poll_s : instrument->update_s;
      // A crossing just after a conversion began waits for the next one, which is read one period later.
      forecast.worst_s = period_s + (asked ? instrument->update_s : 0.0) + instrument->integration_s +
                         instrument->delay_s + guard.debounce_s;
      forecast.worst_missing_s = guard.missing_after_s > 0.0 ? guard.missing_after_s : 3.0 * period_s;
    }
    forecast.acts = guard.action != GuardAction::hold && !hookup.controls.empty();
    forecasts.push_back(std::move(forecast));
  }
  return forecasts;
}

}  // namespace loadstair::setup
