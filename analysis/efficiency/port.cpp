#include "analysis/efficiency/port.h"

#include <cmath>
#include <numbers>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/base/require.h"
#include "analysis/estimate/coverage.h"

namespace loadstair::efficiency {

namespace {

/// No waveform's RMS lies below its rectified mean; a capture of a square wave may, by rounding.
constexpr double kLeastFormFactor = 1 - 1e-3;

bool has(const std::optional<Quoted>& channel) {
  return channel && channel->ok();
}

/// The first channel that exists but has no value.
std::optional<std::string> missing(std::initializer_list<const std::optional<Quoted>*> channels) {
  for (const auto* channel : channels) {
    if (*channel && !(*channel)->ok()) return "missing channel " + (*channel)->refusal().text();
  }
  return std::nullopt;
}

bool is_output(Role role) {
  return role == Role::output || role == Role::auxiliary_output;
}

/// What burden and leads change, all resistive: mean squares and active power of one port on their way to the
/// terminals. For DC the squares are those of the means.
struct Quantities {
  std::optional<Estimate> voltage;
  std::optional<Estimate> current;
  std::optional<Estimate> power;
};

/// One correction: +1 towards the converter at an input (the drop is lost before it), -1 at an output.
struct Correction {
  std::string text;
  Estimate power;
};

/// |v -+ R i|: exact for DC with its sign; for AC from mean squares, (v - s R i)^2 = V^2 - 2 s R P + R^2 I^2.
Estimate moved(const Estimate& x, const Estimate& y, const Estimate& factor, const Estimate& power,
               double sign, Current current) {
  if (current == Current::dc) return x - sign * (factor * y);
  const Estimate squared = square(x) - (2 * sign) * (factor * power) + square(factor * y);
  return squared.value() > 0 ? square_root(squared) : x;
}

void apply_series(const Resistance& resistance, std::string_view what, const Port& port, Quantities& q,
                  std::vector<Correction>& corrections, std::vector<std::string>& remarks) {
  if (!q.current || !q.power) {
    remarks.push_back(std::string{what} + " not corrected: the port has no current");
    return;
  }
  const double sign = is_output(port.role) ? -1 : 1;
  const Estimate ohm = resistance_estimate(resistance);
  const Estimate change = -sign * (ohm * square(*q.current));
  if (q.voltage) q.voltage = moved(*q.voltage, *q.current, ohm, *q.power, sign, port.current);
  q.power = *q.power + change;
  corrections.push_back({std::string{what}, change});
}

void apply_shunt(const Resistance& resistance, std::string_view what, const Port& port, Quantities& q,
                 std::vector<Correction>& corrections, std::vector<std::string>& remarks) {
  if (!q.voltage || !q.power) {
    remarks.push_back(std::string{what} + " not corrected: the port has no voltage");
    return;
  }
  const double sign = is_output(port.role) ? -1 : 1;
  const Estimate siemens = 1.0 / resistance_estimate(resistance);
  const Estimate change = -sign * (siemens * square(*q.voltage));
  if (q.current) q.current = moved(*q.current, *q.voltage, siemens, *q.power, sign, port.current);
  q.power = *q.power + change;
  corrections.push_back({std::string{what}, change});
}

/// A declaration that cannot be a resistance is set aside with a remark; zero ohm corrects nothing.
const Resistance* usable(const std::optional<Resistance>& resistance, std::vector<std::string>& remarks) {
  if (!resistance || resistance->ohm == 0) return nullptr;
  if (resistance->tolerance && !std::isfinite(*resistance->tolerance)) {
    remarks.push_back(resistance->name + ": its tolerance is not a finite number; not corrected");
    return nullptr;
  }
  if (std::isfinite(resistance->ohm) && resistance->ohm > 0) return &*resistance;
  remarks.push_back(resistance->name + ": declared as " + base::print_number(resistance->ohm) +
                    " ohm, which is no resistance; not corrected");
  return nullptr;
}

/// Burden first, as the meters sit nearer to the reading; then the leads between the tap and the terminals.
void correct(const Port& port, Quantities q, PortPower& out) {
  std::vector<Correction> corrections;
  const bool at_terminals = port.sensing == Sensing::at_terminals;
  if (at_terminals || port.voltmeter == VoltmeterPosition::converter_side) {
    if (const auto* impedance = usable(port.voltmeter_impedance, out.remarks)) {
      apply_shunt(*impedance, "voltmeter's current", port, q, corrections, out.remarks);
    }
  } else if (const auto* ammeter = usable(port.ammeter, out.remarks)) {
    apply_series(*ammeter, "ammeter's drop", port, q, corrections, out.remarks);
  }
  if (at_terminals && port.voltmeter == VoltmeterPosition::outer_side) {
    out.remarks.push_back(
        "voltage is sensed at the terminals: the voltmeter counts as on the converter's side");
  }
  if (!at_terminals) {
    if (const auto* lead = usable(port.lead, out.remarks)) {
      apply_series(*lead, "drop of the leads", port, q, corrections, out.remarks);
    }
  }
  for (const Correction& one : corrections) {
    out.correction = out.correction ? *out.correction + one.power : one.power;
    const std::string sign = one.power.value() < 0 ? "" : "+";
    out.correction_texts.push_back(one.text + " " + sign + base::print_significant(one.power.value(), 3) +
                                   " W");
  }
  out.active_power = *q.power;
  if (q.voltage) out.voltage = *q.voltage;
  if (q.current) out.current = *q.current;
}

/// A reading that is not a finite number counts as missing.
void sanitise(std::optional<Quoted>& reading, const std::string& name) {
  if (has(reading) && !is_finite(**reading))
    reading = Quoted{base::Refusal{name, "a reading is not a finite number"}};
}

PortReading sane(PortReading reading, const std::string& name) {
  sanitise(reading.voltage, name);
  sanitise(reading.current, name);
  sanitise(reading.power, name);
  sanitise(reading.capture_power, name);
  sanitise(reading.power_factor, name);
  if (reading.product_less_power && !is_finite(*reading.product_less_power))
    reading.product_less_power.reset();
  if (reading.ripple_power && !is_finite(*reading.ripple_power)) {
    // The product of the means is then not known to be the power.
    reading.ripple_power.reset();
    if (has(reading.current)) reading.current = Quoted{base::Refusal{name, "its ripple power is not finite"}};
  }
  return reading;
}

/// Numbers of a size that no product of them is finite.
void refuse_overflow(Quoted& quoted, const std::string& name) {
  if (quoted && !is_finite(*quoted)) quoted = base::Refusal{name, "not a finite number"};
}

struct Way {
  std::string method;
  Estimate power;
};

/// All ways in which the port's active power is had, the one to be used first.
std::vector<Way> ways_of(const Port& port, const PortReading& reading) {
  std::vector<Way> ways;
  if (has(reading.power)) ways.push_back({"wattmeter", **reading.power});
  if (has(reading.capture_power)) ways.push_back({"capture", **reading.capture_power});
  if (!has(reading.voltage) || !has(reading.current)) return ways;
  const Estimate product = **reading.voltage * **reading.current;
  if (port.current == Current::dc) {
    ways.push_back({"V x I", reading.ripple_power ? product + *reading.ripple_power : product});
  } else if (has(reading.power_factor)) {
    ways.push_back({"V x I x PF", product * **reading.power_factor});
  }
  return ways;
}

void cross_check(const std::vector<Way>& ways, const PortReading& reading, PortPower& out) {
  for (std::size_t i = 1; i < ways.size(); ++i) {
    const bool unshared =
        reading.product_less_power && ways[0].method == "wattmeter" && ways[i].method != "capture";
    CrossCheck check;
    check.used = ways[0].method;
    check.other = ways[i].method;
    check.difference = unshared ? *reading.product_less_power : ways[i].power - ways[0].power;
    if (!is_finite(check.difference)) continue;
    check.allowed = estimate::coverage(check.difference).expanded;
    check.agrees = std::abs(check.difference.value()) <= check.allowed;
    check.text = check.used + " gives " + base::print_significant(ways[0].power.value(), 5) + " W, " +
                 check.other + " " + base::print_significant(ways[i].power.value(), 5) + " W: ";
    const std::string allowed = base::print_significant(check.allowed, 2) + " W";
    if (check.agrees) {
      check.text += "they agree within the " + allowed + " that their uncertainties allow";
    } else {
      check.text += "they differ by more than the " + allowed +
                    " that their uncertainties allow; check wiring, ranges and declarations";
      out.remarks.push_back(check.text);
    }
    out.cross_checks.push_back(std::move(check));
  }
}

void refuse_power(const Port& port, const PortReading& reading, PortPower& out) {
  const auto gone = missing({&reading.power, &reading.capture_power, &reading.voltage, &reading.current,
                             port.current == Current::ac ? &reading.power_factor : &reading.current});
  if (port.current == Current::ac && has(reading.voltage) && has(reading.current)) {
    out.state = PowerState::apparent_only;
    out.state_text = "apparent power only";
    const std::string why =
        gone ? *gone
             : "volts times amps of an AC port are not watts: give a wattmeter, a capture or a power factor";
    out.active_power = base::Refusal{port.name, "apparent power only; " + why};
    out.power_factor = base::Refusal{port.name, "no active power"};
    return;
  }
  out.state = PowerState::missing;
  if (gone) {
    out.state_text = *gone;
  } else if (!reading.voltage && !reading.current && !reading.power && !reading.capture_power) {
    out.state_text = "no channel measures " + port.name;
  } else {
    out.state_text =
        std::string{"no "} + (reading.voltage ? "current" : "voltage") + " channel at " + port.name;
  }
  out.active_power = base::Refusal{port.name, out.state_text};
}

void add_ac(PortPower& out) {
  if (!out.voltage || !out.current) {
    out.apparent_power = base::Refusal{out.port, "no voltage or no current at this port"};
    out.power_factor = out.apparent_power;
    return;
  }
  out.apparent_power = *out.voltage * *out.current;
  out.power_factor = base::Refusal{out.port, "no active power"};
  if (out.active_power)
    out.power_factor = estimate::ratio(*out.active_power, *out.apparent_power, "power factor");
}

}  // namespace

Estimate resistance_estimate(const Resistance& resistance) {
  base::require(std::isfinite(resistance.ohm) && resistance.ohm > 0, "a declared resistance is above zero");
  const double tolerance = std::abs(resistance.tolerance.value_or(kUndeclaredTolerance));
  estimate::Source source;
  source.key = estimate::key::component(resistance.name, "resistance");
  source.name = resistance.name + ": resistance";
  source.distribution = estimate::Distribution::rectangular;
  source.owner.instrument = resistance.name;
  if (!resistance.tolerance) {
    source.remedy = estimate::Remedy::declare_tolerance;
    // As if measured to 5 %.
    source.variance_left = (0.05 / kUndeclaredTolerance) * (0.05 / kUndeclaredTolerance);
  }
  return estimate::bounded(resistance.ohm * (1 - tolerance), resistance.ohm * (1 + tolerance),
                           estimate::make_source(std::move(source)));
}

bool is_finite(const Estimate& of) {
  return std::isfinite(of.value()) && std::isfinite(of.variance());
}

PortPower port_power(const Port& port, const PortReading& given) {
  const PortReading reading = sane(given, port.name);
  PortPower out;
  out.port = port.name;
  out.voltage = reading.voltage.value_or(base::Refusal{port.name, "no voltage channel"});
  out.current = reading.current.value_or(base::Refusal{port.name, "no current channel"});
  const std::vector<Way> ways = ways_of(port, reading);
  if (ways.empty()) {
    refuse_power(port, reading, out);
  } else {
    out.state = PowerState::measured;
    out.state_text = "measured";
    out.method = ways.front().method;
    cross_check(ways, reading, out);
    Quantities q;
    if (has(reading.voltage)) q.voltage = **reading.voltage;
    if (has(reading.current)) q.current = **reading.current;
    q.power = ways.front().power;
    correct(port, q, out);
  }
  if (out.active_power && !is_finite(*out.active_power)) {
    out.state = PowerState::missing;
    out.state_text = "its power is not a finite number";
    out.active_power = base::Refusal{port.name, out.state_text};
    out.correction.reset();
    out.correction_texts.clear();
  }
  refuse_overflow(out.voltage, port.name);
  refuse_overflow(out.current, port.name);
  if (port.current == Current::ac) {
    add_ac(out);
    refuse_overflow(out.apparent_power, port.name);
    refuse_overflow(out.power_factor, port.name);
  } else {
    out.apparent_power = base::Refusal{port.name, "not asked of a DC port"};
    out.power_factor = out.apparent_power;
  }
  if (out.voltage && out.current) {
    if (auto remark = lead_remark(port, out.voltage->value(), out.current->value()))
      out.remarks.push_back(*remark);
  }
  return out;
}

Quoted ripple_bound(const Port& port, double ripple_current_rms_a, double source_resistance_ohm,
                    std::string_view run) {
  const double most = source_resistance_ohm * ripple_current_rms_a * ripple_current_rms_a;
  if (!(source_resistance_ohm >= 0) || !(ripple_current_rms_a >= 0) || !std::isfinite(most))
    return base::Refusal{port.name, "ripple current or source resistance is below zero or not finite"};
  estimate::Source source;
  source.key = estimate::key::window(run, "", port.name + ": ripple power");
  source.name = port.name + ": ripple power without a capture";
  source.distribution = estimate::Distribution::rectangular;
  source.owner.instrument = port.name;
  source.remedy = estimate::Remedy::capture;
  source.variance_left = 0;
  const bool into = port.role == Role::input || port.role == Role::auxiliary_input;
  Quoted out = estimate::bounded(-most, into ? 0 : most, estimate::make_source(std::move(source)));
  refuse_overflow(out, port.name);
  return out;
}

Quoted rms_from_average_responding(const Estimate& shown, const Estimate& form_factor) {
  if (!is_finite(shown) || !is_finite(form_factor) || !(form_factor.value() >= kLeastFormFactor))
    return base::Refusal{"form factor", "below 1, or a number that is not finite"};
  const double of_a_sine = std::numbers::pi / (2 * std::numbers::sqrt2);
  Quoted out = shown * form_factor / of_a_sine;
  refuse_overflow(out, "form factor");
  return out;
}

LeadEffect lead_effect(double voltage_v, double current_a, double lead_ohm) {
  LeadEffect out;
  if (!std::isfinite(current_a * current_a * lead_ohm) || !std::isfinite(voltage_v * current_a)) return out;
  out.power_w = current_a * current_a * lead_ohm;
  const double through = std::abs(voltage_v * current_a);
  if (through > 0) {
    out.relative = out.power_w / through;
  } else {
    out.relative = out.power_w > 0 ? 1 : 0;
  }
  out.matters = out.relative > kLeadMatters;
  return out;
}

std::optional<std::string> lead_remark(const Port& port, double voltage_v, double current_a) {
  if (port.sensing != Sensing::undeclared || port.lead) return std::nullopt;
  const LeadEffect effect = lead_effect(voltage_v, current_a);
  if (!effect.matters) return std::nullopt;
  return port.name + ": sensing is not declared, and 10 milliohm of lead would move its power by " +
         base::print_significant(effect.power_w, 3) + " W (" +
         base::print_significant(100 * effect.relative, 2) + " %) at " +
         base::print_significant(std::abs(current_a), 3) +
         " A; sense at the terminals by separate wires, or declare the lead resistance";
}

}  // namespace loadstair::efficiency
