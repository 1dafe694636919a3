#include "simulation/record.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "drivers/instrument/reading.h"
#include "simulation/draw.h"

namespace loadstair::simulation {
namespace {

constexpr std::int64_t kSecond = 1'000'000'000;
constexpr std::int64_t kStart = 1'790'000'000 * kSecond;
constexpr double kBefore_s = 10.0;  ///< of each step, before its window
constexpr double kAfter_s = 2.0;

std::int64_t to_ns(double seconds) {
  return std::llround(seconds * 1e9);
}

/// A meter with its errors, on one level of one run.
class Face {
 public:
  Face(const Bench& bench, const Meter& meter, std::size_t range, const std::string& run,
       const std::string& level)
      : trouble_{bench.trouble}, spec_{meter.ranges[range]}, noise_{meter.noise_share * spec_.upto} {
    const std::string part = std::to_string(range);
    gain_limit_ = spec_.reading_percent / 100.0;
    // The rounding of the display is inside limits that are stated in digits.
    const double digits = spec_.digits > 0.0 ? spec_.digits - 0.5 : 0.0;
    offset_limit_ = spec_.range_percent / 100.0 * spec_.upto + digits * spec_.resolution;
    gain_ = standing(bench, meter, "gain/" + part, run, level);
    offset_ = standing(bench, meter, "offset/" + part, run, level);
    Draw own{seed_for(bench.seed, meter.unit_name + "/shape/" + part)};
    waves_ = own.between(1.0, 4.0);
    phase_ = own.between(0.0, 2.0 * std::numbers::pi);
    wave_ = own.between(-1.0, 1.0);
    creep_ = own.between(-1.0, 1.0);
  }

  /// at  where in the run, 0 to 1
  double show(double signal, double at, Draw& draw) const {
    const double limit = gain_limit_ * std::abs(signal) + offset_limit_;
    double kept = 1.0;
    double more = 0.0;
    if (trouble_ == Trouble::nonlinearity) {
      kept = 0.5;
      more = 0.5 * wave_ * limit * std::sin(2.0 * std::numbers::pi * waves_ * signal / spec_.upto + phase_);
    } else if (trouble_ == Trouble::gain_drift) {
      kept = 0.5;
      more = 0.5 * creep_ * gain_limit_ * signal * (2.0 * at - 1.0);
    }
    const double raw = signal + kept * (gain_limit_ * signal * gain_ + offset_limit_ * offset_) + more;
    return rounded(raw + noise_ * draw.normal());
  }

 private:
  [[nodiscard]] double rounded(double raw) const {
    return spec_.resolution > 0.0 ? std::round(raw / spec_.resolution) * spec_.resolution : raw;
  }

  Trouble trouble_;
  const setup::RangeSpec& spec_;
  double noise_, gain_limit_ = 0.0, offset_limit_ = 0.0, gain_ = 0.0, offset_ = 0.0;
  double waves_ = 1.0, phase_ = 0.0, wave_ = 0.0, creep_ = 0.0;
};

/// Where the window lies, s since the run's start.
double window_begins(const Bench& bench, std::size_t step) {
  return static_cast<double>(step) * (bench.window_s + kBefore_s + kAfter_s) + kBefore_s;
}

struct Place {
  std::size_t step = 0;
  std::string run, level;
  double run_s = 1.0;  ///< length of the run
};

void poll(const Bench& bench, const PortPlan& port, const Meter& meter, const Window& window,
          const Wiring& wiring, const Place& place, store::StoredChannel& into) {
  Draw draw{seed_for(bench.seed, meter.channel + "/poll/" + place.run + "/" + place.level)};
  const double begins_s = window_begins(bench, place.step);
  const double middle = window.signal(port, meter, wiring, bench.window_s / 2.0);
  const std::size_t range = range_for(meter, middle);
  const Face face{bench, meter, range, place.run, place.level};
  const double clock_s = meter.update_s * draw.uniform();  // a free-running meter's own beat
  double ask_s = -2.0 + meter.poll_s * draw.uniform();
  const double usual_latency_s = draw.spread(0.002, 0.05);
  while (ask_s < bench.window_s + kAfter_s) {
    const double latency_s = usual_latency_s * draw.between(0.7, 1.5);
    const double declared_s = meter.delay_s + meter.integration_s / 2.0;
    // The conversion is done somewhere between question and answer, and was its delay ago.
    double conversion_s = ask_s + latency_s * draw.uniform() - declared_s - meter.hidden_delay_s;
    if (meter.update_s > 0.0) {
      conversion_s = std::floor((conversion_s - clock_s) / meter.update_s) * meter.update_s + clock_s;
    }
    const double at = (begins_s + ask_s) / place.run_s;
    const double shown = face.show(window.signal(port, meter, wiring, conversion_s), at, draw);
    const double instant_s = ask_s + latency_s / 2.0 - declared_s - meter.update_s / 2.0;
    into.t_ns.push_back(kStart + to_ns(begins_s + instant_s));
    into.half_width_ns.push_back(to_ns(latency_s / 2.0 + meter.update_s / 2.0));
    into.value.push_back(shown);
    into.flags.push_back(0);
    into.range.push_back(meter.names_range ? meter.ranges[range].upto : 0.0);
    into.reply.push_back(static_cast<std::int64_t>(into.reply.size()) + 1);
    ask_s += meter.poll_s * draw.between(0.97, 1.03);
  }
}

/// Two rounds, the second in reverse order, so that a channel's two instants lie around the middle.
void type(const Bench& bench, const PortPlan& port, const Meter& meter, const Window& window,
          const Wiring& wiring, const Place& place, std::int32_t channel, store::StoredRun& run) {
  Draw draw{seed_for(bench.seed, meter.channel + "/type/" + place.run + "/" + place.level)};
  const double begins_s = window_begins(bench, place.step);
  const double middle = window.signal(port, meter, wiring, bench.window_s / 2.0);
  const Face face{bench, meter, range_for(meter, middle), place.run, place.level};
  for (const int round : {1, 2}) {
    const double from_middle_s = bench.window_s * (0.42 - 0.06 * channel) * (round == 1 ? -1.0 : 1.0);
    const double prompted_s = bench.window_s / 2.0 + from_middle_s - 1.0;
    const double entered_s = prompted_s + 2.0;
    const double looked_s = draw.between(prompted_s, entered_s);
    store::StoredTypedAnswer answer;
    answer.step = static_cast<std::int32_t>(place.step);
    answer.channel = channel;
    answer.round = round;
    answer.prompted_ns = kStart + to_ns(begins_s + prompted_s);
    answer.entered_ns = kStart + to_ns(begins_s + entered_s);
    answer.value =
        face.show(window.signal(port, meter, wiring, looked_s), (begins_s + looked_s) / place.run_s, draw);
    answer.last_digit = meter.ranges[range_for(meter, middle)].resolution;
    if (meter.names_range) answer.range = meter.ranges[range_for(meter, middle)].upto;
    answer.flags = instrument::kTyped;
    run.typed.push_back(answer);
  }
}

store::StoredStep stored_step(const Bench& bench, std::size_t step, const std::string& label, double load_w) {
  store::StoredStep made;
  made.index = static_cast<std::int32_t>(step);
  made.label = label;
  made.load_w = load_w;
  made.state = store::StepState::done;
  const std::int64_t average = kStart + to_ns(window_begins(bench, step));
  made.begun_ns = average - to_ns(kBefore_s);
  made.soak_begin_ns = made.begun_ns;
  made.settle_begin_ns = average - to_ns(kBefore_s / 2.0);
  made.settled_ns = average - to_ns(0.5);
  made.settled_how = "slope";
  made.average_begin_ns = average;
  made.average_end_ns = average + to_ns(bench.window_s);
  made.ended_ns = made.average_end_ns;
  return made;
}

std::string percent(double share) {
  return std::to_string(std::lround(100.0 * share)) + " %";
}

}  // namespace

std::size_t range_for(const Meter& meter, double signal) {
  for (std::size_t i = 0; i < meter.ranges.size(); ++i) {
    if (std::abs(signal) * meter.headroom <= meter.ranges[i].upto) return i;
  }
  return meter.ranges.size() - 1;
}

namespace {

Wiring wired(const Bench& bench, const PortPlan& port, const PortMoment& moment, bool as_it_is,
             const Wiring& before) {
  const auto ohm = [&](const std::string& name, double nominal, double tolerance_percent) {
    return as_it_is ? true_ohm(bench, name, nominal, tolerance_percent) : nominal;
  };
  Wiring wiring;
  if (port.lead_ohm > 0.0)
    wiring.lead_ohm = ohm(port.name() + " leads", port.lead_ohm, port.lead_tolerance_percent);
  for (const Meter& meter : port.meters) {
    const std::size_t place = range_for(meter, signal_of(port, meter, before, moment));
    const setup::RangeSpec& range = meter.ranges[place];
    const std::string name = meter.unit_name + " " + std::to_string(place);
    const double tolerance_percent = range.impedance_tolerance_percent.value_or(30.0);
    if (meter.signal == Signal::voltage && range.impedance_ohm > 0.0)
      wiring.voltmeter_ohm = ohm(name, range.impedance_ohm, tolerance_percent);
    if (meter.signal != Signal::current) continue;
    if (meter.shunt_ohm > 0.0) {
      wiring.shunt_ohm = wiring.ammeter_ohm =
          ohm(meter.unit_name + " shunt", meter.shunt_ohm, meter.shunt_tolerance_percent);
    } else if (range.impedance_ohm > 0.0) {
      wiring.ammeter_ohm = ohm(name, range.impedance_ohm, tolerance_percent);
    }
  }
  return wiring;
}

}  // namespace

Wiring wiring_of(const Bench& bench, const PortPlan& port, const PortMoment& moment, bool as_it_is) {
  // What the meters see decides their ranges, and the ranges' burdens what they see: twice is enough.
  Wiring wiring;
  for (const Meter& meter : port.meters) {
    if (meter.shunt_ohm > 0.0) wiring.shunt_ohm = meter.shunt_ohm;
  }
  wiring = wired(bench, port, moment, as_it_is, wiring);
  return wired(bench, port, moment, as_it_is, wiring);
}

Recorded record_run(const Bench& bench, const Board& board, const std::vector<std::size_t>& levels,
                    std::int64_t run) {
  Recorded out;
  out.run.summary.run = run;
  out.run.summary.prototype = out.stair.prototype.name = "Stoat";
  out.run.summary.unit = out.stair.prototype.unit = "D-" + std::to_string(run);
  out.run.summary.state = store::RunState::done;
  out.run.summary.started_ns = kStart + run;  // what tells two runs apart
  out.stair.ratings.input_voltage_v = bench.source_v;
  out.stair.ratings.output_voltage_v = bench.output_v;
  out.stair.ratings.output_power_w = bench.rated_w;
  out.stair.ratings.output_frequency_hz = bench.output.ac ? 50.0 : 0.0;
  for (const PortPlan* port : {&bench.input, &bench.output}) {
    for (const Meter& meter : port->meters) {
      store::StoredChannel channel;
      channel.entry.name = meter.channel;
      out.run.channels.push_back(channel);
    }
  }
  const std::string name = std::to_string(run);
  const double run_s = window_begins(bench, levels.size());
  for (std::size_t step = 0; step < levels.size(); ++step) {
    const std::size_t level = levels[step];
    const std::string label = percent(bench.levels.at(level));
    const Place place{step, name, label, run_s};
    const Window window{bench, board, level, name};
    out.truths.push_back(window.truth());
    out.middle.push_back(window.at(bench.window_s / 2.0));
    out.run.steps.push_back(stored_step(bench, step, label, bench.rated_w * bench.levels[level]));
    setup::Step planned;
    planned.label = label;
    planned.load_w = bench.rated_w * bench.levels[level];
    planned.average_s = bench.window_s;
    out.stair.steps.push_back(planned);
    std::int32_t channel = 0;
    for (const PortPlan* port : {&bench.input, &bench.output}) {
      const Moment& middle = out.middle.back();
      const Wiring wiring = wiring_of(bench, *port, port->input ? middle.input : middle.output, true);
      for (const Meter& meter : port->meters) {
        if (meter.typed) {
          type(bench, *port, meter, window, wiring, place, channel, out.run);
        } else {
          poll(bench, *port, meter, window, wiring, place,
               out.run.channels[static_cast<std::size_t>(channel)]);
        }
        ++channel;
      }
    }
  }
  return out;
}

}  // namespace loadstair::simulation
