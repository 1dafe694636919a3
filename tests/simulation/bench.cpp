#include "simulation/bench.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "simulation/draw.h"

namespace loadstair::simulation {
namespace {

/// Ranges in the usual steps, so that the largest holds `most` and small levels fall onto smaller ones.
std::vector<double> full_scales(Draw& draw, double most) {
  const double top = most * draw.between(1.1, 2.5);
  std::vector<double> scales = {top};
  if (draw.chance(0.7)) scales.insert(scales.begin(), top / draw.between(2.5, 10.0));
  if (scales.size() == 2 && draw.chance(0.4)) scales.insert(scales.begin(), scales.front() / 4.0);
  return scales;
}

struct Grade {
  double reading_percent, range_percent;
};

Meter draw_meter(Draw& draw, Signal signal, double most, Grade grade_of, const BenchChoice& choice) {
  Meter meter;
  meter.signal = signal;
  for (const double upto : full_scales(draw, most)) {
    setup::RangeSpec range;
    range.upto = upto;
    range.reading_percent = grade_of.reading_percent;
    range.range_percent = grade_of.range_percent;
    meter.ranges.push_back(range);
  }
  const double digit = std::pow(10.0, -draw.between(3.7, 5.5));
  const bool in_digits = draw.chance(0.4);
  const double digits = std::floor(draw.between(2.0, 6.0));
  for (setup::RangeSpec& range : meter.ranges) {
    if (choice.quiet) continue;
    range.resolution = std::pow(10.0, std::round(std::log10(range.upto * digit)));
    if (!in_digits) continue;
    range.digits = digits;
    range.range_percent = 0.0;
  }
  meter.names_range = draw.chance(0.5);
  if (meter.names_range && draw.chance(0.5)) meter.headroom = 1.3;
  meter.poll_s = draw.spread(0.15, 1.0);
  meter.integration_s = draw.chance(0.7) ? draw.between(0.02, 0.2) : 0.0;
  meter.update_s = draw.chance(0.4) ? draw.between(0.1, 0.4) : 0.0;
  meter.delay_s = draw.chance(0.4) ? draw.between(0.02, 0.8) : 0.0;
  const double noise_share = choice.noisy ? draw.spread(3e-4, 1e-2) : draw.spread(1e-6, 3e-4);
  meter.noise_share = choice.quiet ? 0.0 : noise_share;
  meter.shares = choice.shares;
  if (choice.repeatability > 0.0) {
    meter.repeatability_percent = choice.repeatability * grade_of.reading_percent;
    const double unshared = choice.repeatability * choice.repeatability;
    meter.shares = {1.0 - unshared, unshared / 2.0, unshared / 2.0};
  }
  return meter;
}

void make_shunt(Draw& draw, Meter& meter, double most_a) {
  meter.shunt_ohm = draw.between(0.05, 0.2) / most_a;
  meter.shunt_tolerance_percent = draw.spread(0.05, 0.5);
  for (setup::RangeSpec& range : meter.ranges) {
    range.upto *= meter.shunt_ohm;
    range.resolution *= meter.shunt_ohm;
  }
}

void set_burdens(Draw& draw, PortPlan& port, double most_v, double most_a) {
  for (Meter& meter : port.meters) {
    if (meter.shunt_ohm > 0.0) continue;
    for (setup::RangeSpec& range : meter.ranges) {
      if (meter.signal == Signal::voltage) {
        // Up to half a percent of the full current.
        range.impedance_ohm = most_v / most_a * draw.spread(200.0, 1e6);
      } else if (meter.signal == Signal::current) {
        range.impedance_ohm = most_v / most_a * draw.spread(1e-5, 5e-3);
      } else {
        continue;
      }
      if (draw.chance(0.7)) range.impedance_tolerance_percent = draw.between(1.0, 20.0);
    }
  }
}

PortPlan draw_port(Draw& draw, bool input, bool ac, double most_w, double most_v, const BenchChoice& choice) {
  PortPlan port;
  port.input = input;
  port.ac = ac;
  if (ac) {
    port.power_factor = draw.between(0.8, 1.0);
    const double kind = draw.uniform();
    port.way = kind < 0.5   ? Way::wattmeter
               : kind < 0.8 ? Way::power_factor_meter
                            : Way::declared_power_factor;
    if (port.way == Way::declared_power_factor) {
      port.least_power_factor = draw.between(0.97, 0.995);
      port.power_factor = draw.between(port.least_power_factor, 1.0);
    }
  }
  const double most_a = 1.1 * most_w / most_v / port.power_factor;
  const Grade fine{draw.spread(0.02, 0.5), draw.spread(0.01, 0.2)};
  const Grade coarse{draw.spread(0.05, 1.0), draw.spread(0.01, 0.3)};
  const bool product = port.way != Way::wattmeter;
  port.with_product = !product && draw.chance(0.6);
  if (product || port.with_product) {
    port.meters.push_back(draw_meter(draw, Signal::voltage, 1.05 * most_v, fine, choice));
    port.meters.push_back(draw_meter(draw, Signal::current, most_a, coarse, choice));
    if (!choice.plain && !ac && draw.chance(0.3)) make_shunt(draw, port.meters.back(), most_a);
  }
  if (!product) port.meters.push_back(draw_meter(draw, Signal::power, 1.3 * most_w, coarse, choice));
  if (port.way == Way::power_factor_meter)
    port.meters.push_back(draw_meter(draw, Signal::power_factor, 1.0, {0.2, 0.1}, choice));
  if (choice.plain) return port;
  if (product || port.with_product) set_burdens(draw, port, most_v, most_a);
  port.outer = port.with_product || product ? draw.chance(0.4) : false;
  port.sensed = !port.outer && draw.chance(0.5);
  if (!port.sensed && (product || port.with_product)) {
    port.lead_ohm = most_v / most_a * draw.spread(1e-4, 5e-3);
    port.lead_tolerance_percent = draw.between(5.0, 40.0);
  }
  if (input && !ac && draw.chance(0.3)) {
    port.ripple_a = most_a * draw.between(0.05, 0.3);
    port.ripple_source_ohm = most_v / most_a * draw.spread(1e-4, 5e-3);
  }
  return port;
}

void name_meters(Draw& draw, PortPlan& port, const BenchChoice& choice) {
  const bool typed = draw.chance(0.25) && !choice.plain && !choice.linked;
  for (Meter& meter : port.meters) {
    static const char* const kNames[] = {" volts", " amperes", " watts", " power factor"};
    meter.channel = port.name() + kNames[static_cast<std::size_t>(meter.signal)];
    meter.unit_name = meter.channel + " meter";
    meter.typed = typed;
  }
}

/// One handheld voltmeter for both ends, moved between them: one meter, one error.
void share_voltmeter(Draw& draw, Bench& bench) {
  const bool shared = draw.chance(0.5);
  if (bench.input.meters.empty() || bench.output.meters.empty() || bench.output.ac || !shared) return;
  Meter& in = bench.input.meters.front();
  Meter& out = bench.output.meters.front();
  if (!in.typed || !out.typed || in.signal != Signal::voltage || out.signal != Signal::voltage) return;
  const std::string out_channel = out.channel;
  const std::string in_channel = in.channel;
  (in.ranges.back().upto > out.ranges.back().upto ? out : in) =
      in.ranges.back().upto > out.ranges.back().upto ? in : out;
  in.unit_name = out.unit_name = "handheld";
  in.channel = in_channel;
  out.channel = out_channel;
}

void apply_trouble(Draw& draw, Bench& bench) {
  switch (bench.trouble) {
    case Trouble::hidden_latency:
      bench.drift_share = draw.between(-0.02, 0.02);
      for (PortPlan* port : {&bench.input, &bench.output}) {
        for (Meter& meter : port->meters) meter.hidden_delay_s = draw.between(0.0, 0.5);
      }
      break;
    case Trouble::burst:
      bench.levels = {0.03, 0.05, 0.08, 0.04, 0.09};
      break;
    default:
      break;
  }
}

}  // namespace

const Meter* PortPlan::find(Signal signal) const {
  for (const Meter& meter : meters) {
    if (meter.signal == signal) return &meter;
  }
  return nullptr;
}

std::string name_of(Trouble trouble) {
  switch (trouble) {
    case Trouble::none:
      return "as modelled";
    case Trouble::nonlinearity:
      return "sine-shaped nonlinearity";
    case Trouble::gain_drift:
      return "drift of gain within the run";
    case Trouble::hidden_latency:
      return "latency not declared";
    case Trouble::burst:
      return "burst mode below 10 % load";
    case Trouble::fan:
      return "a fan steps the loss in mid-step";
    case Trouble::lamps:
      return "lamps whose power sags";
  }
  return {};
}

Board draw_board(std::uint64_t seed, double rated_w) {
  Draw draw{seed_for(seed, "board")};
  return {rated_w * draw.between(0.002, 0.01), rated_w * draw.between(0.01, 0.04),
          rated_w * draw.between(0.01, 0.05)};
}

Bench draw_bench(std::uint64_t seed, const BenchChoice& choice) {
  Draw draw{seed_for(seed, "bench")};
  Bench bench;
  bench.seed = seed;
  bench.trouble = choice.trouble;
  bench.rated_w = draw.spread(20.0, 2000.0);
  const bool inverter = !choice.plain && draw.chance(0.5);
  bench.source_v = inverter ? draw.between(20.0, 400.0) : draw.between(10.0, 60.0);
  bench.output_v = inverter ? 230.0 : draw.between(3.0, 60.0);
  bench.source_ohm = bench.source_v * bench.source_v / bench.rated_w * draw.between(0.0005, 0.02);
  bench.output_ohm = bench.output_v * bench.output_v / bench.rated_w * draw.between(0.0, 0.02);
  bench.board = draw_board(seed, bench.rated_w);
  bench.input = draw_port(draw, true, false, 1.15 * bench.rated_w, bench.source_v, choice);
  bench.output = draw_port(draw, false, inverter, 1.02 * bench.rated_w, bench.output_v, choice);
  name_meters(draw, bench.input, choice);
  name_meters(draw, bench.output, choice);
  share_voltmeter(draw, bench);
  bench.levels = {0.1, 0.25, 0.5, 0.75, 1.0};
  bench.window_s = draw.between(25.0, 60.0);
  if (!choice.quiet) {
    bench.drift_share = draw.between(-0.003, 0.003);
    bench.wander_share = choice.noisy ? draw.spread(1e-3, 3e-2) : draw.spread(1e-5, 5e-3);
    bench.wander_s = draw.between(0.05, 0.5);
  }
  apply_trouble(draw, bench);
  return bench;
}

double standing(const Bench& bench, const Meter& meter, const std::string& part, const std::string& run,
                const std::string& level) {
  const auto score = [&](const std::string& key) { return Draw{seed_for(bench.seed, key)}.normal(); };
  const auto of_scores = [](double correlation) {
    return 2.0 * std::sin(std::numbers::pi * correlation / 6.0);
  };
  const double fixed = of_scores(meter.shares.fixed);
  const double in_run = of_scores(meter.shares.fixed + meter.shares.per_run);
  const std::string key = meter.unit_name + "/" + part;
  const double z = std::sqrt(fixed) * score(key) + std::sqrt(in_run - fixed) * score(key + "/" + run) +
                   std::sqrt(1.0 - in_run) * score(key + "/" + run + "/" + level + "/" + meter.channel);
  return 2.0 * grade(z) - 1.0;
}

double true_ohm(const Bench& bench, const std::string& name, double ohm, double tolerance_percent) {
  const double at = Draw{seed_for(bench.seed, name + "/ohm")}.between(-1.0, 1.0);
  return ohm * (1.0 + tolerance_percent / 100.0 * at);
}

namespace {

setup::Channel channel_of(const PortPlan& port, const Meter& meter, setup::Hookup& hookup) {
  setup::Channel channel;
  channel.name = meter.channel;
  channel.typed = meter.typed;
  if (meter.typed) {
    channel.meter = meter.unit_name;
  } else {
    channel.instrument = meter.unit_name;
    channel.value = "reading";
    setup::Instrument instrument;
    instrument.name = meter.unit_name;
    instrument.poll_s = meter.poll_s;
    instrument.integration_s = meter.integration_s;
    instrument.update_s = meter.update_s;
    instrument.delay_s = meter.delay_s;
    hookup.instruments.push_back(instrument);
  }
  static constexpr setup::Quantity kQuantities[] = {setup::Quantity::voltage, setup::Quantity::current,
                                                    setup::Quantity::power, setup::Quantity::power_factor};
  static const char* const kUnits[] = {"V", "A", "W", "1"};
  channel.quantity = kQuantities[static_cast<std::size_t>(meter.signal)];
  channel.unit = kUnits[static_cast<std::size_t>(meter.signal)];
  if (port.ac) channel.response = setup::Response::true_rms_ac_dc;
  if (meter.signal == Signal::power) channel.response = setup::Response::wattmeter;
  channel.ranges = meter.ranges;
  if (meter.shunt_ohm > 0.0) {
    setup::Shunt shunt;
    shunt.resistance_ohm = meter.shunt_ohm;
    shunt.tolerance_percent = meter.shunt_tolerance_percent;
    channel.conversion.shunt = shunt;
  }
  return channel;
}

setup::Port port_of(const PortPlan& plan) {
  setup::Port port;
  port.name = plan.name();
  port.direction = plan.input ? setup::Direction::input : setup::Direction::output;
  port.kind = plan.ac ? setup::PortKind::ac : setup::PortKind::dc;
  for (const Meter& meter : plan.meters) {
    if (meter.signal == Signal::voltage) port.voltage = meter.channel;
    if (meter.signal == Signal::current) port.current = meter.channel;
    if (meter.signal == Signal::power) port.power = meter.channel;
    if (meter.signal == Signal::power_factor) port.power_factor = meter.channel;
  }
  if (plan.way == Way::declared_power_factor) port.power_factor_low = plan.least_power_factor;
  port.voltmeter = plan.outer ? setup::VoltmeterSide::outer : setup::VoltmeterSide::converter;
  port.sensed = plan.sensed;
  if (plan.lead_ohm > 0.0) {
    port.lead_resistance_ohm = plan.lead_ohm;
    port.lead_tolerance_percent = plan.lead_tolerance_percent;
  }
  if (plan.ripple_a > 0.0) {
    port.ripple_current_rms_a = plan.ripple_a;
    port.source_resistance_ohm = plan.ripple_source_ohm;
  }
  return port;
}

}  // namespace

setup::Hookup hookup_of(const Bench& bench) {
  setup::Hookup hookup;
  hookup.bench = "drawn bench";
  for (const PortPlan* port : {&bench.input, &bench.output}) {
    hookup.ports.push_back(port_of(*port));
    for (const Meter& meter : port->meters) {
      hookup.channels.push_back(channel_of(*port, meter, hookup));
      if (meter.repeatability_percent > 0.0)
        hookup.repeatability_percent[meter.channel] = meter.repeatability_percent;
    }
  }
  return hookup;
}

}  // namespace loadstair::simulation
