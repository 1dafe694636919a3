#include "simulation/plant.h"

#include <algorithm>
#include <cmath>

#include "simulation/draw.h"

namespace loadstair::simulation {
namespace {

/// Current into a port of `power_w` behind a resistance: the smaller root of (v - r i) i = p.
double current_behind(double volts, double ohm, double power_w) {
  if (ohm <= 0.0) return power_w / volts;
  return (volts - std::sqrt(std::max(0.0, volts * volts - 4.0 * ohm * power_w))) / (2.0 * ohm);
}

struct Disturbance {
  double fan_at_s = 1e9, fan_w = 0.0;
  double sag_share = 0.0, sag_s = 1.0;
  double burst_hz = 0.0, burst_duty = 1.0;
};

Disturbance draw_disturbance(const Bench& bench, Draw& draw) {
  Disturbance out;
  if (bench.trouble == Trouble::fan) {
    out.fan_at_s = bench.window_s * draw.between(0.1, 0.9);
    out.fan_w = bench.rated_w * draw.between(0.001, 0.005);
  } else if (bench.trouble == Trouble::lamps) {
    out.sag_share = draw.between(0.005, 0.05);
    out.sag_s = bench.window_s * draw.between(0.1, 0.5);
  } else if (bench.trouble == Trouble::burst) {
    out.burst_hz = draw.spread(0.5, 10.0);
    out.burst_duty = draw.between(0.3, 0.7);
  }
  return out;
}

}  // namespace

Window::Window(const Bench& bench, const Board& board, std::size_t level, const std::string& run)
    : bench_{bench}, board_{board} {
  Draw draw{seed_for(bench.seed, "window/" + run + "/" + std::to_string(level))};
  ripple_w_ = -bench.input.ripple_source_ohm * bench.input.ripple_a * bench.input.ripple_a *
              Draw{seed_for(bench.seed, "ripple/" + run)}.uniform();
  const Disturbance disturbance = draw_disturbance(bench, draw);
  const double level_w = bench.rated_w * bench.levels.at(level) * draw.between(0.99, 1.01);
  const auto count = static_cast<std::size_t>(bench.window_s / step_s_) + 1;
  const double stay = std::exp(-step_s_ / bench.wander_s);
  double wander = draw.normal();
  moments_.reserve(count);
  double input_ws = 0.0;
  double output_ws = 0.0;
  for (std::size_t i = 0; i < count; ++i) {
    const double t_s = static_cast<double>(i) * step_s_;
    wander = stay * wander + std::sqrt(1.0 - stay * stay) * draw.normal();
    const double load_w =
        level_w * (1.0 + bench.drift_share * (t_s / bench.window_s - 0.5) + bench.wander_share * wander +
                   disturbance.sag_share * std::exp(-t_s / disturbance.sag_s));
    const double phase = t_s * disturbance.burst_hz;
    const bool on = disturbance.burst_hz <= 0.0 || phase - std::floor(phase) < disturbance.burst_duty;
    const double gate = disturbance.burst_hz <= 0.0 ? 1.0 : (on ? 1.0 / disturbance.burst_duty : 0.0);
    moments_.push_back(moment(load_w, t_s > disturbance.fan_at_s ? disturbance.fan_w : 0.0, gate));
    const double weight = i == 0 || i + 1 == count ? 0.5 : 1.0;
    input_ws += weight * moments_.back().input.power;
    output_ws += weight * moments_.back().output.power;
  }
  const auto intervals = static_cast<double>(count - 1);
  truth_.input_w = input_ws / intervals;
  truth_.output_w = output_ws / intervals;
  truth_.efficiency = truth_.output_w / truth_.input_w;
  truth_.loss_w = truth_.input_w - truth_.output_w;
}

/// gate  input power over its mean: bursts
Moment Window::moment(double load_w, double extra_loss_w, double gate) const {
  Moment out;
  const double share = load_w / bench_.rated_w;
  const double loss_w = board_.p0_w + board_.p1_w * share + board_.p2_w * share * share + extra_loss_w;
  const double factor = bench_.output.power_factor;
  const double amperes = current_behind(bench_.output_v, bench_.output_ohm, load_w / factor);
  const double volts = load_w / factor / amperes;
  out.output.voltage = volts;
  out.output.current =
      amperes * std::complex<double>{factor, -std::sqrt(std::max(0.0, 1.0 - factor * factor))};
  out.output.power = load_w;
  // Without its ripple the input's mean voltage and mean current carry a little more than flows in.
  const double carried_w = (load_w + loss_w) * gate - ripple_w_;
  const double drawn_a = current_behind(bench_.source_v, bench_.source_ohm, carried_w);
  out.input.current = drawn_a;
  out.input.voltage = bench_.source_v - bench_.source_ohm * drawn_a;
  out.input.power = carried_w + ripple_w_;
  return out;
}

Moment Window::at(double t_s) const {
  const double place = std::clamp(t_s / step_s_, 0.0, static_cast<double>(moments_.size() - 1));
  return moments_[static_cast<std::size_t>(std::lround(place))];
}

double signal_of(const PortPlan& port, const Meter& meter, const Wiring& wiring, const PortMoment& moment) {
  const double way = port.input ? 1.0 : -1.0;  // what the wiring eats is added before the converter
  std::complex<double> volts = moment.voltage;
  std::complex<double> amperes = moment.current;
  if (!port.sensed) volts += way * wiring.lead_ohm * moment.current;
  if (port.outer) {
    volts += way * wiring.ammeter_ohm * moment.current;
  } else if (wiring.voltmeter_ohm > 0.0) {
    amperes += way * volts / wiring.voltmeter_ohm;
  }
  switch (meter.signal) {
    case Signal::voltage:
      return std::abs(volts);
    case Signal::current:
      return std::abs(amperes) * (meter.shunt_ohm > 0.0 ? wiring.shunt_ohm : 1.0);
    case Signal::power:
      return std::real(volts * std::conj(amperes));
    case Signal::power_factor:
      return std::real(volts * std::conj(amperes)) / (std::abs(volts) * std::abs(amperes));
  }
  return 0.0;
}

double Window::signal(const PortPlan& port, const Meter& meter, const Wiring& wiring, double t_s) const {
  const int pieces = std::max(1, static_cast<int>(meter.integration_s / step_s_));
  double sum = 0.0;
  for (int i = 0; i < pieces; ++i) {
    const double offset_s = (static_cast<double>(i) + 0.5 - pieces / 2.0) * step_s_;
    const Moment now = at(t_s + (pieces == 1 ? 0.0 : offset_s));
    sum += signal_of(port, meter, wiring, port.input ? now.input : now.output);
  }
  return sum / pieces;
}

}  // namespace loadstair::simulation
