#include "simulation/implied.h"

#include <cmath>
#include <functional>

#include "simulation/record.h"

namespace loadstair::simulation {
namespace {

constexpr double kFactor = 1.959964;  ///< normal, 95 % two-sided (JCGM 100:2008 table G.2: 1.96)

double square(double x) {
  return x * x;
}

/// What can be changed of what is known of a port.
struct Known {
  std::map<Signal, double> shown;
  Wiring wiring;
  double power_factor = 1.0, ripple_w = 0.0;
};

double power_of(const PortPlan& port, const Known& known) {
  std::map<Signal, double> shown = known.shown;
  if (port.way == Way::declared_power_factor) shown[Signal::power_factor] = known.power_factor;
  return recovered_w(port, shown, known.wiring, known.ripple_w);
}

class Collector {
 public:
  Collector(const PortPlan& port, Known known, Effects& into)
      : port_{port}, known_{std::move(known)}, into_{into} {}

  /// change  moves what is known by as many standard deviations
  void add(const std::string& key, double shared, const std::function<void(Known&, double)>& change) {
    constexpr double kPart = 0.01;
    Known up = known_;
    Known down = known_;
    change(up, kPart);
    change(down, -kPart);
    const double effect_w = (power_of(port_, up) - power_of(port_, down)) / (2.0 * kPart);
    Effect& effect = into_[key];
    (port_.input ? effect.input_w : effect.output_w) += effect_w;
    effect.shared = shared;
  }

  [[nodiscard]] const Known& known() const { return known_; }

 private:
  const PortPlan& port_;
  Known known_;
  Effects& into_;
};

void add_meter(Collector& collector, const Meter& meter) {
  const double shown = collector.known().shown.at(meter.signal);
  const std::size_t place = range_for(meter, shown * (meter.shunt_ohm > 0.0 ? meter.shunt_ohm : 1.0));
  const setup::RangeSpec& range = meter.ranges[place];
  const double per_raw = meter.shunt_ohm > 0.0 ? 1.0 / meter.shunt_ohm : 1.0;
  const double gain = range.reading_percent / 100.0 * shown / std::sqrt(3.0);
  const double offset =
      per_raw * (range.range_percent / 100.0 * range.upto + range.digits * range.resolution) / std::sqrt(3.0);
  const auto move = [&](double by) {
    return [&meter, by](Known& known, double deviations) { known.shown[meter.signal] += by * deviations; };
  };
  const std::string key = meter.unit_name + "/" + std::to_string(place) + "/";
  collector.add(key + "gain", meter.shares.fixed, move(gain));
  collector.add(key + "offset", meter.shares.fixed, move(offset));
  if (range.digits <= 0.0 && range.resolution > 0.0)
    collector.add(meter.channel + "/digit", 0.0, move(per_raw * range.resolution / std::sqrt(12.0)));
  if (meter.shunt_ohm > 0.0) {
    const double relative = meter.shunt_tolerance_percent / 100.0 / std::sqrt(3.0);
    collector.add(meter.unit_name + "/shunt", 1.0, [relative](Known& known, double deviations) {
      known.shown[Signal::current] /= 1.0 + relative * deviations;
      known.wiring.ammeter_ohm *= 1.0 + relative * deviations;
    });
    return;
  }
  const double relative = range.impedance_tolerance_percent.value_or(30.0) / 100.0 / std::sqrt(3.0);
  if (range.impedance_ohm <= 0.0) return;
  const auto ohm = meter.signal == Signal::voltage ? &Wiring::voltmeter_ohm : &Wiring::ammeter_ohm;
  collector.add(key + "burden", 1.0, [relative, ohm](Known& known, double deviations) {
    known.wiring.*ohm *= 1.0 + relative * deviations;
  });
}

void add_port(const Bench& bench, const PortPlan& port, const PortMoment& moment, Effects& into) {
  Known known;
  known.wiring = wiring_of(bench, port, moment, false);
  for (const Meter& meter : port.meters) {
    const double signal = signal_of(port, meter, known.wiring, moment);
    known.shown[meter.signal] = meter.shunt_ohm > 0.0 ? signal / meter.shunt_ohm : signal;
  }
  known.power_factor = (1.0 + port.least_power_factor) / 2.0;
  const double most_w = port.ripple_source_ohm * square(port.ripple_a);
  known.ripple_w = -most_w / 2.0;
  Collector collector{port, known, into};
  for (const Meter& meter : port.meters) {
    const bool used = port.way != Way::wattmeter || meter.signal == Signal::power;
    // Volts and amperes of a wattmeter enter through the wiring's corrections only.
    if (used || port.with_product) add_meter(collector, meter);
  }
  const double lead = port.lead_tolerance_percent / 100.0 / std::sqrt(3.0);
  collector.add(port.name() + "/leads", 1.0,
                [lead](Known& one, double deviations) { one.wiring.lead_ohm *= 1.0 + lead * deviations; });
  const double factor = (1.0 - port.least_power_factor) / 2.0 / std::sqrt(3.0);
  collector.add(port.name() + "/power factor", 1.0,
                [factor](Known& one, double deviations) { one.power_factor += factor * deviations; });
  const double ripple = most_w / 2.0 / std::sqrt(3.0);
  collector.add(port.name() + "/ripple", 0.0,
                [ripple](Known& one, double deviations) { one.ripple_w += ripple * deviations; });
}

double of_efficiency(const Effect& effect, const Truth& truth) {
  return (effect.output_w - truth.efficiency * effect.input_w) / truth.input_w;
}

}  // namespace

double recovered_w(const PortPlan& port, const std::map<Signal, double>& shown, const Wiring& wiring,
                   double ripple_w) {
  const double way = port.input ? 1.0 : -1.0;
  const auto value = [&](Signal signal, double otherwise) {
    const auto found = shown.find(signal);
    return found == shown.end() ? otherwise : found->second;
  };
  const double volts = value(Signal::voltage, 0.0);
  const double amperes = value(Signal::current, 0.0);
  double power_w = value(Signal::power, volts * amperes * value(Signal::power_factor, 1.0) + ripple_w);
  double square_a = square(amperes);  // of the current through the leads
  if (port.outer) {
    power_w -= way * wiring.ammeter_ohm * square_a;
  } else if (wiring.voltmeter_ohm > 0.0) {
    const double siemens = 1.0 / wiring.voltmeter_ohm;
    square_a += -way * 2.0 * siemens * power_w + square(siemens * volts);
    power_w -= way * siemens * square(volts);
  }
  if (!port.sensed) power_w -= way * wiring.lead_ohm * square_a;
  return power_w;
}

Effects effects_of(const Bench& bench, const Moment& middle) {
  Effects effects;
  add_port(bench, bench.input, middle.input, effects);
  add_port(bench, bench.output, middle.output, effects);
  return effects;
}

Widths widths_of(const Effects& effects, const Truth& truth) {
  Widths sum;
  for (const auto& [key, effect] : effects) {
    sum.input_w += square(effect.input_w);
    sum.output_w += square(effect.output_w);
    sum.loss_w += square(effect.input_w - effect.output_w);
    sum.efficiency += square(of_efficiency(effect, truth));
  }
  return {kFactor * std::sqrt(sum.input_w), kFactor * std::sqrt(sum.output_w),
          kFactor * std::sqrt(sum.efficiency), kFactor * std::sqrt(sum.loss_w)};
}

double width_of_difference(const Effects& a, const Truth& truth_a, const Effects& b, const Truth& truth_b) {
  double sum = 0.0;
  for (const auto& [key, effect] : a) {
    const auto other = b.find(key);
    const double first = of_efficiency(effect, truth_a);
    const double second = other == b.end() ? 0.0 : of_efficiency(other->second, truth_b);
    sum += square(first) + square(second) - 2.0 * effect.shared * first * second;
  }
  return kFactor * std::sqrt(sum);
}

}  // namespace loadstair::simulation
