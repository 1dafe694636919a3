// A bench, a stair and a recorded run written by hand, with answers in closed form.
#pragma once

#include <cmath>
#include <cstdint>
#include <functional>
#include <string>
#include <vector>

#include "analysis/base/number.h"
#include "daemon/evaluation/evaluate.h"

namespace loadstair::evaluation_tests {

inline constexpr std::int64_t kSecond = 1'000'000'000;
inline constexpr std::int64_t kStart = 1'790'000'000 * kSecond;
/// Each step takes this long; its window is from 10 to 20 s.
inline constexpr std::int64_t kStepLength = 20 * kSecond;
inline constexpr int kReadings = 50;  ///< per window, 0.2 s apart

/// A small noise of our own, the same everywhere: uniform in [-1, 1).
class Noise {
 public:
  double next() {
    state_ = state_ * 6364136223846793005ULL + 1442695040888963407ULL;  // Knuth's MMIX constants
    return static_cast<double>(state_ >> 11U) / 4503599627370496.0 - 1.0;
  }

 private:
  std::uint64_t state_ = 1;
};

/// A meter with one range: +-(a % of reading + b % of range).
struct Meter {
  double reading_percent = 0.5, range_percent = 0.0, upto = 1000.0, resolution = 0.0, impedance_ohm = 0.0;
};

class HandBench {
 public:
  setup::Hookup hookup;
  setup::Stair stair;
  store::StoredRun run;

  HandBench() {
    stair.prototype = {"Stoat", "A", "A-001"};
    stair.ratings = {48.0, 12.0, 240.0, 0.0, 40.0};
    run.summary.run = 7;
    run.summary.prototype = "Stoat";
    run.summary.state = store::RunState::done;
    run.summary.started_ns = kStart;
  }

  /// A linked channel on an instrument of its own.
  setup::Channel& link(const std::string& name, setup::Quantity quantity, const std::string& unit,
                       Meter meter) {
    setup::Channel& channel = add(name, quantity, unit, meter);
    channel.instrument = name + " meter";
    channel.value = "reading";
    setup::Instrument instrument;
    instrument.name = channel.instrument;
    hookup.instruments.push_back(instrument);
    return channel;
  }
  setup::Channel& type(const std::string& name, setup::Quantity quantity, const std::string& unit,
                       Meter meter) {
    setup::Channel& channel = add(name, quantity, unit, meter);
    channel.typed = true;
    return channel;
  }
  setup::Port& port(const std::string& name, setup::Direction direction,
                    setup::PortKind kind = setup::PortKind::dc) {
    setup::Port made;
    made.name = name;
    made.direction = direction;
    made.kind = kind;
    made.sensed = true;
    hookup.ports.push_back(made);
    return hookup.ports.back();
  }
  /// A step whose window holds kReadings readings of each linked channel that `read` is then called for.
  int step(const std::string& label, double load_w) {
    const auto index = static_cast<std::int32_t>(run.steps.size());
    store::StoredStep made;
    made.index = index;
    made.label = label;
    made.load_w = load_w;
    made.state = store::StepState::done;
    const std::int64_t begun = kStart + index * kStepLength;
    made.begun_ns = begun;
    made.soak_begin_ns = begun;
    made.settle_begin_ns = begun + 2 * kSecond;
    made.settled_ns = begun + 9 * kSecond;
    made.settled_how = "slope";
    made.average_begin_ns = begun + 10 * kSecond;
    made.average_end_ns = begun + 20 * kSecond;
    made.ended_ns = begun + 20 * kSecond;
    run.steps.push_back(made);
    setup::Step planned;
    planned.label = label;
    planned.load_w = load_w;
    stair.steps.push_back(planned);
    return index;
  }
  store::StoredChannel& stored(const std::string& channel) {
    for (store::StoredChannel& one : run.channels) {
      if (one.entry.name == channel) return one;
    }
    throw std::logic_error{"no channel " + channel};
  }
  void read(const std::string& channel, std::int64_t t_ns, double value, std::uint32_t flags = 0,
            double range = 0.0) {
    store::StoredChannel& into = stored(channel);
    into.t_ns.push_back(t_ns);
    into.half_width_ns.push_back(20'000'000);
    into.value.push_back(value);
    into.flags.push_back(flags);
    into.range.push_back(range);
    into.reply.push_back(static_cast<std::int64_t>(into.reply.size()) + 1);
  }
  /// Fills a step's window; `value` gets the number of the reading.
  void read_window(const std::string& channel, int step, const std::function<double(int)>& value) {
    for (int i = 0; i < kReadings; ++i) {
      read(channel, kStart + step * kStepLength + 10 * kSecond + 100'000'000 + i * std::int64_t{200'000'000},
           value(i));
    }
  }
  void read_window(const std::string& channel, int step, double value) {
    read_window(channel, step, [=](int) { return value; });
  }
  void type_round(const std::string& channel, int step, int round, double value, double at_s,
                  double last_digit) {
    store::StoredTypedAnswer answer;
    answer.step = step;
    for (std::size_t i = 0; i < run.channels.size(); ++i) {
      if (run.channels[i].entry.name == channel) answer.channel = static_cast<std::int32_t>(i);
    }
    answer.round = round;
    const std::int64_t middle = kStart + step * kStepLength + 10 * kSecond + std::llround(at_s * 1e9);
    answer.prompted_ns = middle - kSecond / 2;
    answer.entered_ns = middle + kSecond / 2;
    answer.value = value;
    answer.last_digit = last_digit;
    answer.flags = instrument::kTyped;
    run.typed.push_back(answer);
  }
  [[nodiscard]] evaluation::RunResult evaluate() const { return evaluation::evaluate(run, hookup, stair); }

 private:
  setup::Channel& add(const std::string& name, setup::Quantity quantity, const std::string& unit,
                      Meter meter) {
    setup::Channel channel;
    channel.name = name;
    channel.quantity = quantity;
    channel.unit = unit;
    setup::RangeSpec range;
    range.upto = meter.upto;
    range.reading_percent = meter.reading_percent;
    range.range_percent = meter.range_percent;
    range.resolution = meter.resolution;
    range.impedance_ohm = meter.impedance_ohm;
    channel.ranges.push_back(range);
    hookup.channels.push_back(channel);
    store::StoredChannel made;
    made.entry.name = name;
    run.channels.push_back(made);
    return hookup.channels.back();
  }
};

/// 39.9 W in, 38.5 W out on four meters: the Stoat at a sixth of its load.
inline HandBench stoat_bench(Meter meter = {}) {
  HandBench bench;
  bench.hookup.channels.reserve(16);
  bench.link("input voltage", setup::Quantity::voltage, "V", meter);
  bench.link("input current", setup::Quantity::current, "A", meter);
  bench.link("output voltage", setup::Quantity::voltage, "V", meter);
  bench.link("output current", setup::Quantity::current, "A", meter);
  setup::Port& input = bench.port("input", setup::Direction::input);
  input.voltage = "input voltage";
  input.current = "input current";
  setup::Port& output = bench.port("output", setup::Direction::output);
  output.voltage = "output voltage";
  output.current = "output current";
  const int step = bench.step("40 W", 40.0);
  bench.read_window("input voltage", step, 48.0);
  bench.read_window("input current", step, 39.9 / 48.0);
  bench.read_window("output voltage", step, 12.0);
  bench.read_window("output current", step, 38.5 / 12.0);
  return bench;
}

/// The quantities of a result, each with a name.
inline void each_quantity(const evaluation::RunResult& run,
                          const std::function<void(const std::string&, const evaluation::Quantity&)>& visit) {
  for (const evaluation::StepResult& step : run.steps) {
    const std::string at = step.label + ": ";
    visit(at + "input power", step.input_power);
    visit(at + "output power", step.output_power);
    visit(at + "efficiency", step.efficiency);
    visit(at + "loss", step.loss);
    visit(at + "power factor", step.power_factor);
    visit(at + "thd", step.thd_voltage);
    visit(at + "crest factor", step.crest_factor);
    visit(at + "frequency", step.frequency);
    for (const auto& temperature : step.temperatures) {
      visit(at + temperature.place, temperature.end);
      if (temperature.ambient) visit(at + "ambient", *temperature.ambient);
    }
    for (const auto& port : step.ports) {
      visit(at + port.name + " power", port.power);
      visit(at + port.name + " apparent power", port.apparent_power);
      visit(at + port.name + " power factor", port.power_factor);
      visit(at + port.name + " voltage", port.voltage);
      visit(at + port.name + " current", port.current);
    }
  }
  for (const auto& entry : run.curve) {
    visit("curve output", entry.output_power);
    visit("curve efficiency", entry.efficiency);
    visit("curve loss", entry.loss);
  }
  for (const auto& weighted : run.weighted) {
    visit(weighted.title, weighted.efficiency);
    for (const auto& use : weighted.uses) visit(weighted.title + " use", use.efficiency);
  }
}

/// Everything that is printed of a result, for comparing two of them bit by bit.
inline std::string fingerprint(const evaluation::RunResult& run) {
  std::string text;
  const auto number = [&](double value) { text += base::print_number(value) + "|"; };
  each_quantity(run, [&](const std::string& name, const evaluation::Quantity& quantity) {
    text += name + "=";
    number(quantity.value);
    number(quantity.low);
    number(quantity.high);
    number(quantity.k.value_or(0.0));
    text += quantity.why + (quantity.known ? "+" : "-") + (quantity.uncertainty_known ? "+" : "-") + "\n";
  });
  for (const auto& step : run.steps) {
    text += step.result_state + "\n";
    for (const auto& entry : step.budget) {
      text += entry.source + "=";
      number(entry.share);
    }
  }
  return text;
}

}  // namespace loadstair::evaluation_tests
