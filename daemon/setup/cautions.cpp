#include <algorithm>
#include <set>

#include "analysis/base/number.h"
#include "daemon/setup/cautions_parts.h"
#include "daemon/setup/explain.h"

namespace loadstair::setup {
namespace {

using Findings = std::vector<Finding>;

std::string quoted(const std::string& name) {
  return "\"" + name + "\"";
}
std::string figures(double value) {
  return base::print_significant(value, 3);
}

bool any_live(const Hookup& hookup) {
  return std::any_of(hookup.ports.begin(), hookup.ports.end(), [](const Port& port) { return port.live; });
}

// One sentence on an instrument that ties, or may tie, a live node to earth.
void check_isolation(const Instrument& instrument, const std::string& where, Findings& findings) {
  if (instrument.isolation == Isolation::isolated || instrument.isolation == Isolation::battery) return;
  const bool earthed = instrument.isolation == Isolation::earthed;
  findings.push_back({Severity::error,
                      "instrument " + quoted(instrument.name) + " is on " + where + ", which is live, and " +
                          (earthed ? "is tied to earth: this would short a live node through its shield. Use "
                                     "an isolated instrument, "
                                     "a rated differential or isolated probe, or an isolator in its interface"
                                   : "nothing says whether it is isolated. Find out before connecting it; "
                                     "then declare \"isolation\": "
                                     "isolated, battery or earthed")});
}

void check_live_nodes(const Hookup& hookup, Findings& findings) {
  std::set<std::string> seen;
  const auto check = [&](const std::string& instrument_name, const std::string& where) {
    const Instrument* instrument = hookup.find_instrument(instrument_name);
    if (instrument != nullptr && seen.insert(instrument_name).second)
      check_isolation(*instrument, where, findings);
  };
  for (const Port& port : hookup.ports) {
    if (!port.live) continue;
    for (const auto& name : {port.voltage, port.current, port.power, port.power_factor}) {
      if (const Channel* channel = hookup.find_channel(name))
        check(channel->instrument, "port " + quoted(port.name));
    }
    for (const CaptureSource& capture : hookup.captures) {
      if (capture.port == port.name) check(capture.instrument, "port " + quoted(port.name));
    }
    for (const Control& control : hookup.controls) {
      const bool here = control.role == (port.direction == Direction::input ? "source" : "load");
      if (here) check(control.instrument, "port " + quoted(port.name));
    }
  }
  if (!any_live(hookup)) return;
  for (const TemperaturePoint& point : hookup.temperatures) {
    if (const Channel* channel = hookup.find_channel(point.channel)) {
      check(channel->instrument, "temperature point " + quoted(point.place));
    }
  }
}

// How the power at a port and its current follow from the ratings.
struct PortRating {
  double voltage_v = 0.0;
  double power_w = 0.0;
};
PortRating rating_of(const Port& port, const Ratings& ratings) {
  return {port.direction == Direction::input ? ratings.input_voltage_v : ratings.output_voltage_v,
          ratings.output_power_w};
}

// docs/methods.md, section 6: where 10 milliohm would move the power by more than 0.1 %.
void check_sensing(const Port& port, const Ratings& ratings, Findings& findings) {
  if (port.sensed.value_or(false) || port.lead_resistance_ohm || !port.counted) return;
  const PortRating rating = rating_of(port, ratings);
  const double current_a = rating.power_w / rating.voltage_v;
  constexpr double kSupposedOhm = 0.010;
  constexpr double kShareThatMatters = 0.001;
  if (kSupposedOhm * current_a * current_a <= kShareThatMatters * rating.power_w) return;
  const double loss_w = 0.005 * current_a * current_a;
  findings.push_back({Severity::warning,
                      "port " + quoted(port.name) + ": nothing says where its voltage is sensed. At " +
                          figures(current_a) +
                          " A every 5 milliohm of lead between the meter and the converter's terminals is " +
                          figures(loss_w) + " W of " + figures(rating.power_w) + " W (" +
                          figures(100.0 * loss_w / rating.power_w) +
                          " %). Run separate sense wires to the terminals and write \"sensed\": true, or "
                          "measure the leads and write "
                          "\"lead_resistance_ohm\""});
}

// Above these a part is hazardous to touch in normal condition: 60 V DC, 30 V AC (IEC 61010-1:2010, 6.3.1;
// from memory). Who forgets "live" would lose the isolation check.
void check_declared_live(const Port& port, const Ratings& ratings, Findings& findings) {
  const double voltage_v = rating_of(port, ratings).voltage_v;
  if (port.live || voltage_v <= (port.kind == PortKind::ac ? 30.0 : 60.0)) return;
  findings.push_back(
      {Severity::warning,
       "port " + quoted(port.name) + " is rated " + figures(voltage_v) + " V " +
           (port.kind == PortKind::ac ? "AC" : "DC") +
           " but not declared \"live\", so the isolation of what is connected to it was not checked; "
           "write \"live\": true"});
}

bool captured(const Hookup& hookup, const Port& port) {
  return std::any_of(hookup.captures.begin(), hookup.captures.end(), [&](const CaptureSource& capture) {
    return capture.port == port.name && !capture.voltage_column.empty() && !capture.current_column.empty();
  });
}

// The power of a single-phase AC output pulsates at twice its frequency, between nothing and twice its mean.
// Without input capacitors so does the input's current: i^2 of its ripple is I^2 / 2.
void check_ripple(const Hookup& hookup, const Port& port, const Stair* stair, Findings& findings) {
  const bool pulsates = std::any_of(hookup.ports.begin(), hookup.ports.end(), [](const Port& other) {
    return other.direction == Direction::output && other.kind == PortKind::ac;
  });
  const bool here = port.kind == PortKind::dc && port.direction == Direction::input && port.counted;
  const bool bounded = port.ripple_current_rms_a && port.source_resistance_ohm;
  if (!pulsates || !here || bounded || !port.power.empty() || captured(hookup, port)) return;
  std::string cost;
  if (stair != nullptr && stair->ratings.input_voltage_v > 0.0) {
    const double current_a = stair->ratings.output_power_w / stair->ratings.input_voltage_v;
    cost = " At " + figures(current_a) + " A that is up to " + figures(current_a * current_a / 2.0) +
           " W for each ohm between the source and here, if the converter had no input capacitors.";
  }
  findings.push_back(
      {Severity::warning,
       "port " + quoted(port.name) +
           ": nothing bounds its ripple power. The AC output makes the current here pulsate at twice its "
           "frequency, and the product of the means counts it as input." +
           cost +
           " Write \"ripple_current_rms_a\" and \"source_resistance_ohm\", or declare a capture of this "
           "port's "
           "voltage and current"});
}

void check_identities(const Hookup& hookup, Findings& findings) {
  for (const Control& control : hookup.controls) {
    const Instrument* instrument = hookup.find_instrument(control.instrument);
    if (instrument == nullptr || !instrument->identity.empty() || instrument->profile.identity_query.empty())
      continue;
    findings.push_back(
        {Severity::error, "control " + quoted(control.name) + ": " + quoted(instrument->name) +
                              " declares no \"identity\", so whatever answers at its address would be "
                              "commanded, another instrument too. Write how its reply to " +
                              instrument->profile.identity_query +
                              " begins, such as \"identity\": \"NORTH BENCH,DC SOURCE\""});
  }
}

void check_ac_power(const Hookup& hookup, const Port& port, Findings& findings) {
  if (port.kind != PortKind::ac || !port.power.empty() || !port.power_factor.empty() || port.power_factor_low)
    return;
  if (captured(hookup, port)) return;
  findings.push_back(
      {Severity::warning,
       "port " + quoted(port.name) +
           ": volts times amps is apparent power, not power. No efficiency will be claimed. Add a "
           "wattmeter's \"power\", a \"power_factor\", a declared \"power_factor_low\", or a capture of "
           "voltage and current"});
}

void check_accuracy(const Hookup& hookup, Findings& findings) {
  for (const Channel& channel : hookup.channels) {
    if (!channel.ranges.empty()) continue;
    findings.push_back(
        {Severity::warning, "channel " + quoted(channel.name) +
                                " declares no accuracy (\"ranges\"): what depends on it will say "
                                "\"uncertainty not known\""});
  }
}

void check_guards(const Hookup& hookup, const Stair& stair, Findings& findings) {
  if (stair.guards.empty()) {
    findings.push_back({Severity::warning,
                        "the stair has no guards: nothing will stop the run but you and the "
                        "protection of the bench"});
  }
  if (!hookup.controls.empty()) return;
  for (const Guard& guard : stair.guards) {
    findings.push_back({Severity::warning, "guard " + quoted(guard.name) +
                                               " can only tell you: the hook-up has no control that could be "
                                               "switched off"});
  }
}

void check_prompts(const Hookup& hookup, const Stair& stair, Findings& findings) {
  const bool by_hand = std::any_of(stair.steps.begin(), stair.steps.end(), [](const Step& step) {
    return !step.prompt.empty() || !step.rewire.empty();
  });
  if (by_hand) findings.push_back({Severity::note, "some steps are done by hand. " + hand_caution(hookup)});
}

void check_ports(const Hookup& hookup, Findings& findings) {
  for (const auto& [direction, word] :
       {std::pair{Direction::input, "input"}, std::pair{Direction::output, "output"}}) {
    const bool there =
        std::any_of(hookup.ports.begin(), hookup.ports.end(),
                    [d = direction](const Port& port) { return port.counted && port.direction == d; });
    if (there) continue;
    findings.push_back({Severity::warning, std::string{"the hook-up has no counted "} + word +
                                               " port, so there is no efficiency to compute"});
  }
  for (const Port& port : hookup.ports) check_ac_power(hookup, port, findings);
}

bool has_role(const Hookup& hookup, std::string_view role) {
  return std::any_of(hookup.controls.begin(), hookup.controls.end(),
                     [&](const Control& control) { return control.role == role; });
}

// The cautions of the trade that this bench gives occasion for; local codes and licensed practice come first.
void add_usual_cautions(const Hookup& hookup, Findings& findings) {
  const auto note = [&](std::string text) { findings.push_back({Severity::note, std::move(text)}); };
  note(
      "Loadstair is not a safety device: have a hardware emergency stop within reach, and never work alone. "
      "Local codes and licensed practice come first.");
  note(
      "Before touching anything: isolate, then prove dead with a tester (prove the tester, test, prove the "
      "tester again), never by this screen. Let the timed discharge pass, then measure.");
  if (any_live(hookup)) {
    note(
        "Leads, probes and meters: rated in category and voltage for the working voltage to earth. Check the "
        "ammeter's jacks before every voltage reading; DC-rated fuses.");
    note("Computer, serial and USB shields tie an instrument to earth unless its interface is isolated.");
    note("Residual-current devices may not trip on DC faults.");
  }
  const bool dc_input = std::any_of(hookup.ports.begin(), hookup.ports.end(), [](const Port& port) {
    return port.live && port.kind == PortKind::dc && port.direction == Direction::input;
  });
  const bool ac_output = std::any_of(hookup.ports.begin(), hookup.ports.end(), [](const Port& port) {
    return port.live && port.kind == PortKind::ac && port.direction == Direction::output;
  });
  if (dc_input && ac_output) {
    note("Both DC rails of a transformerless inverter may carry mains-frequency voltage to earth.");
  }
  if (dc_input) note("Never unplug a DC lead under load: the arc does not go out by itself.");
  if (dc_input && !has_role(hookup, "source")) {
    note(
        "No source can be switched off from here. If it is a battery it stays live: protection, a DC-rated "
        "disconnect and a fuse within reach.");
  }
  if (any_live(hookup) && !hookup.captures.empty()) {
    note(
        "Never clip a scope's ground to input, bus, heatsink or output, and never lift its protective earth: "
        "rated "
        "differential probes and isolated current probes.");
  }
  if (any_live(hookup) && !hookup.temperatures.empty()) {
    note("Thermocouples on live tabs: insulated, rated junctions and an isolated reader only.");
  }
  if (!hookup.loads.empty()) note("Lamps and resistors of the load bank burn: keep hands and cables clear.");
}

}  // namespace

std::vector<Finding> cautions(const Hookup& hookup, const Stair* stair) {
  Findings findings;
  check_live_nodes(hookup, findings);
  check_identities(hookup, findings);
  check_ports(hookup, findings);
  for (const Port& port : hookup.ports) check_ripple(hookup, port, stair, findings);
  if (stair != nullptr) {
    for (const Port& port : hookup.ports) {
      check_declared_live(port, stair->ratings, findings);
      check_sensing(port, stair->ratings, findings);
    }
    check_guards(hookup, *stair, findings);
    find_in_checks(hookup, *stair, findings);
    find_in_limits(hookup, *stair, findings);
  }
  check_accuracy(hookup, findings);
  find_in_conditions(hookup, stair, findings);
  if (stair != nullptr) check_prompts(hookup, *stair, findings);
  add_usual_cautions(hookup, findings);
  std::stable_sort(findings.begin(), findings.end(),
                   [](const Finding& a, const Finding& b) { return a.severity < b.severity; });
  return findings;
}

std::string hand_caution(const Hookup& hookup) {
  if (!any_live(hookup)) {
    return "Switch off before you change leads or loads. Lamps and resistors burn.";
  }
  return "Live parts: never alone, emergency stop within reach. Before touching leads: isolate, prove dead "
         "with a tester "
         "(prove the tester before and after), wait for the discharge and measure. Never unplug a DC lead "
         "under load. "
         "Lamps and resistors burn.";
}

}  // namespace loadstair::setup
