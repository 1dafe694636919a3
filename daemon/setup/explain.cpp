#include "daemon/setup/explain.h"

#include <algorithm>

#include "analysis/base/number.h"
#include "daemon/setup/hookup_parts.h"

namespace loadstair::setup {
namespace {

std::string number(double value) {
  return base::print_number(value);
}
// Six digits at most, without trailing zeros.
std::string short_number(double value) {
  return number(base::parse_number(base::print_significant(value, 6)).value_or(value));
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

std::string describe_conversion(const Conversion& conversion) {
  if (conversion.shunt) return ", through a shunt of " + number(conversion.shunt->resistance_ohm) + " ohm";
  if (conversion.thermocouple) {
    return std::string{", thermocouple type "} + conversion.thermocouple->letter +
           (conversion.thermocouple->cold_junction.empty()
                ? ", reader compensates"
                : ", cold junction " + conversion.thermocouple->cold_junction);
  }
  if (conversion.scale != 1.0) return ", times " + number(conversion.scale);
  return "";
}

std::string describe(const Channel& channel) {
  std::string line =
      "channel " + channel.name + ": " + std::string{name_of(channel.quantity)} + " in " + channel.unit;
  line += channel.typed ? ", typed by a person" : ", " + channel.value + " of " + channel.instrument;
  line += describe_conversion(channel.conversion);
  if (channel.ranges.empty()) return line + "; accuracy not declared";
  line += "; ranges up to";
  for (const RangeSpec& range : channel.ranges) {
    line += (&range == &channel.ranges.front() ? " " : ", ") + number(range.upto);
  }
  return line;
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

std::string describe(const Step& step) {
  std::string line = step.label + ": " + number(step.load_w) + " W";
  for (const SetPoint& point : step.set) {
    line += ", " + point.control + " " + point.setting + " " + short_number(point.value);
  }
  if (!step.prompt.empty()) line += ", by hand: " + step.prompt;
  line += "; soak " + number(step.soak_s) + " s";
  if (step.electrical || step.thermal) line += ", settle at most " + number(step.settle_limit_s) + " s";
  line += ", average " + number(step.average_s) + " s";
  return step.capture ? line + ", capture" : line;
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
  for (const Channel& channel : hookup.channels) lines.push_back(describe(channel));
  for (const Port& port : hookup.ports) lines.push_back(describe(port));
  for (const Control& control : hookup.controls) {
    lines.push_back("control " + control.name + ": " + control.instrument + ", the " + control.role);
  }
  return lines;
}

std::vector<std::string> explain(const Stair& stair) {
  std::vector<std::string> lines = {
      "prototype " + stair.prototype.name +
      (stair.prototype.revision.empty() ? "" : " revision " + stair.prototype.revision) +
      (stair.prototype.unit.empty() ? "" : ", unit " + stair.prototype.unit) + ": " +
      count(stair.steps.size()) + " steps"};
  double most_s = stair.end.cool_down_s + stair.end.discharge_s;
  for (const Step& step : stair.steps) {
    lines.push_back(describe(step));
    most_s += step.soak_s + step.settle_limit_s + step.average_s;
  }
  lines.push_back("at most " + base::print_fixed(most_s / 60.0, 1) + " min, without prompts");
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
