#include "drivers/rehearsal/simulator.h"

#include <algorithm>
#include <array>
#include <cmath>

#include "analysis/base/number.h"
#include "drivers/rehearsal/draws.h"

namespace loadstair::rehearsal {

namespace {

struct KnobName {
  Knob knob;
  std::string_view name;
};
constexpr std::array<KnobName, 9> kKnobs = {{{Knob::source_voltage, "source voltage"},
                                             {Knob::source_output, "source output"},
                                             {Knob::converter, "converter"},
                                             {Knob::load_power, "load power"},
                                             {Knob::load_resistance, "load resistance"},
                                             {Knob::load_current, "load current"},
                                             {Knob::load_input, "load input"},
                                             {Knob::lamps, "lamps"},
                                             {Knob::resistors, "resistors"}}};

/// The bench as it really is: what the description declares, drawn inside its tolerances.
PlantParameters drawn_plant(const BenchDescription& d) {
  PlantParameters p = d.plant;
  const auto factor = [&](std::string_view what, double tolerance) {
    return 1.0 + tolerance * symmetric_draw(key_of(d.seed, what));
  };
  LossParameters& loss = p.converter.loss;
  loss.no_load_w *= factor("plant no load", d.plant_spread);
  loss.linear *= factor("plant linear", d.plant_spread);
  loss.quadratic_per_w *= factor("plant quadratic", d.plant_spread);
  p.input_leads.inner_ohm *= factor("lead input inner", d.lead_tolerance);
  p.input_leads.outer_ohm *= factor("lead input outer", d.lead_tolerance);
  p.output_leads.inner_ohm *= factor("lead output inner", d.lead_tolerance);
  p.output_leads.outer_ohm *= factor("lead output outer", d.lead_tolerance);
  return p;
}

/// Steps are kept for the longest look back of any meter or scope.
double kept_s(const BenchDescription& d) {
  double longest = 0.0;
  for (const InstrumentDescription& i : d.instruments) {
    longest = std::max(longest, i.meter.integration_s + 2.0 * i.meter.update_period_s + i.meter.delay_s);
    if (i.scope) longest = std::max(longest, i.scope->length_s);
  }
  return longest + 2.0;
}

bool has_voltage_circuit(const MeterFunction& f) {
  return (f.quantity == Quantity::voltage || f.quantity == Quantity::power) && f.impedance_ohm > 0.0;
}

bool has_current_circuit(const MeterFunction& f) {
  if (f.quantity != Quantity::current && f.quantity != Quantity::power) return false;
  return f.shunt || std::any_of(f.ranges.begin(), f.ranges.end(),
                                [](const MeterRange& r) { return r.burden_ohm > 0.0; });
}

double magnitude_of(const MeterFunction& f, const PortStep& port) {
  return f.response == Response::dc ? std::abs(port.meter_current.mean)
                                    : std::sqrt(port.meter_current.mean_square);
}

}  // namespace

std::optional<Knob> knob_named(std::string_view name) {
  for (const KnobName& entry : kKnobs)
    if (entry.name == name) return entry.knob;
  return std::nullopt;
}

std::string_view name_of(Knob knob) {
  for (const KnobName& entry : kKnobs)
    if (entry.knob == knob) return entry.name;
  return "none";
}

bool is_switch(Knob knob) {
  return knob == Knob::source_output || knob == Knob::converter || knob == Knob::load_input;
}

Simulator::Simulator(const BenchDescription& description)
    : plant_{drawn_plant(description)}, history_{description.plant.step_s, kept_s(description)} {
  plant_.settings = description.at_start;
  for (const InstrumentDescription& i : description.instruments) {
    MeterDescription meter = i.meter;
    meter.name = i.name;
    meters_.emplace_back(std::move(meter), description.seed, description.run);
  }
  gather_burdens();
}

void Simulator::gather_burdens() {
  series_.clear();
  for (std::size_t m = 0; m < meters_.size(); ++m) {
    const auto& functions = meters_[m].description().functions;
    for (const Port port : {Port::input, Port::output}) {
      // One current circuit in a port, however many functions look at it.
      for (std::size_t f = 0; f < functions.size(); ++f) {
        const Wiring& wiring = meters_[m].wiring(f);
        if (wiring.port != port || wiring.shorted || !has_current_circuit(functions[f])) continue;
        const int fixed = functions[f].fixed_range;
        series_.push_back({m, f, fixed > 0 ? static_cast<std::size_t>(fixed) : 0});
        break;
      }
    }
  }
  apply_burdens();
}

void Simulator::apply_burdens() {
  for (const Port port : {Port::input, Port::output}) {
    PortBurden burden;
    for (const Series& s : series_)
      if (meters_[s.instrument].wiring(s.function).port == port)
        burden.ammeter_ohm += meters_[s.instrument].series_ohm(s.function, s.range);
    for (const Meter& meter : meters_) {
      std::array<bool, 3> counted{};
      for (std::size_t f = 0; f < meter.description().functions.size(); ++f) {
        const MeterFunction& function = meter.description().functions[f];
        const Wiring& wiring = meter.wiring(f);
        const auto node = static_cast<std::size_t>(wiring.node);
        if (wiring.port != port || wiring.shorted || !has_voltage_circuit(function) || counted[node])
          continue;
        counted[node] = true;
        (node == 0   ? burden.terminals_siemens
         : node == 1 ? burden.inner_siemens
                     : burden.outer_siemens) += meter.parallel_siemens(f);
      }
    }
    (port == Port::input ? plant_.input_burden : plant_.output_burden) = burden;
  }
}

bool Simulator::range_ammeters() {
  bool moved = false;
  for (Series& s : series_) {
    const MeterFunction& f = meters_[s.instrument].description().functions[s.function];
    if (f.fixed_range >= 0 || f.shunt || f.ranges.size() < 2) continue;
    const bool at_input = meters_[s.instrument].wiring(s.function).port == Port::input;
    const double magnitude = magnitude_of(f, at_input ? plant_.last().input : plant_.last().output) / f.scale;
    std::size_t range = s.range;
    while (range + 1 < f.ranges.size() && magnitude > f.ranges[range].full_scale) ++range;
    // Down again only well inside the lower range: its own burden moves the current.
    while (range > 0 && magnitude < 0.9 * f.ranges[range - 1].full_scale) --range;
    moved = moved || range != s.range;
    s.range = range;
  }
  return moved;
}

void Simulator::advance(double time_s) {
  const double steps = std::ceil(time_s / history_.step_s() - 1e-9);
  while (static_cast<double>(history_.steps()) < steps) {
    history_.push(plant_.step());
    if (range_ammeters()) apply_burdens();
  }
}

std::vector<Shown> Simulator::read(std::size_t instrument, double time_s) {
  advance(time_s);
  return meters_[instrument].shown(history_, time_s);
}

base::Outcome<void> Simulator::turn(Knob knob, double value, double time_s) {
  const auto refused = [&](const std::string& possible) {
    return base::Refusal{std::string{name_of(knob)},
                         base::print_number(value) + " is not possible; " + possible};
  };
  PlantSettings& s = plant_.settings;
  if (is_switch(knob) && value != 0.0 && value != 1.0) return refused("0 or 1");
  if (value < 0.0) return refused("zero or more");
  const bool counts = knob == Knob::lamps || knob == Knob::resistors;
  const auto most =
      static_cast<double>(knob == Knob::lamps ? plant_.parameters().lamps.count
                                              : static_cast<int>(plant_.parameters().resistors_ohm.size()));
  if (counts && (value > most || value != std::floor(value)))
    return refused("0 to " + base::print_number(most));
  advance(time_s);
  switch (knob) {
    case Knob::none:
      return base::Refusal{"knob", "there is no such knob"};
    case Knob::source_voltage:
      s.source_voltage_v = value;
      break;
    case Knob::source_output:
      s.source_on = value != 0.0;
      break;
    case Knob::converter:
      s.converter_on = value != 0.0;
      break;
    case Knob::load_power:
      s.load_mode = LoadMode::power;
      s.load_power_w = value;
      break;
    case Knob::load_resistance:
      s.load_mode = LoadMode::resistance;
      s.load_resistance_ohm = value;
      break;
    case Knob::load_current:
      s.load_mode = LoadMode::current;
      s.load_current_a = value;
      break;
    case Knob::load_input:
      s.load_on = value != 0.0;
      break;
    case Knob::lamps:
      s.lamps_on = static_cast<int>(value);
      break;
    case Knob::resistors:
      s.resistors_on = static_cast<int>(value);
      break;
  }
  return {};
}

void Simulator::short_circuit(const Circuit& circuit, double time_s) {
  advance(time_s);
  Wiring wiring = meters_[circuit.instrument].wiring(circuit.function);
  wiring.shorted = true;
  meters_[circuit.instrument].wire(circuit.function, wiring);
  gather_burdens();
}

base::Outcome<void> Simulator::tie(const Circuit& first, const Circuit& other, double time_s) {
  const auto quantity_of = [this](const Circuit& circuit) {
    return meters_[circuit.instrument].description().functions[circuit.function].quantity;
  };
  const Quantity a = quantity_of(first);
  const Quantity b = quantity_of(other);
  const bool both_thermometers = a >= Quantity::case_temperature && b >= Quantity::case_temperature;
  if (a != b && !both_thermometers) return base::Refusal{"tie", "the two do not measure the same quantity"};
  advance(time_s);
  meters_[other.instrument].wire(other.function, meters_[first.instrument].wiring(first.function));
  gather_burdens();
  return {};
}

void Simulator::restore_wiring(double time_s) {
  advance(time_s);
  for (Meter& meter : meters_) meter.restore_wiring();
  gather_burdens();
}

double Simulator::position(Knob knob) const {
  const PlantSettings& s = plant_.settings;
  switch (knob) {
    case Knob::none:
      return 0.0;
    case Knob::source_voltage:
      return s.source_voltage_v;
    case Knob::source_output:
      return s.source_on ? 1.0 : 0.0;
    case Knob::converter:
      return s.converter_on ? 1.0 : 0.0;
    case Knob::load_power:
      return s.load_power_w;
    case Knob::load_resistance:
      return s.load_resistance_ohm;
    case Knob::load_current:
      return s.load_current_a;
    case Knob::load_input:
      return s.load_on ? 1.0 : 0.0;
    case Knob::lamps:
      return s.lamps_on;
    case Knob::resistors:
      return s.resistors_on;
  }
  return 0.0;
}

}  // namespace loadstair::rehearsal
