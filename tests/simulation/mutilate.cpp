#include "simulation/mutilate.h"

#include <algorithm>
#include <cstddef>
#include <limits>

#include "drivers/instrument/reading.h"

namespace loadstair::simulation {
namespace {

constexpr double kNan = std::numeric_limits<double>::quiet_NaN();

void keep_readings(store::StoredChannel& channel, std::size_t most) {
  const std::size_t count = std::min(most, channel.t_ns.size());
  channel.t_ns.resize(count);
  channel.half_width_ns.resize(count);
  channel.value.resize(count);
  channel.flags.resize(count);
  channel.range.resize(count);
  channel.reply.resize(count);
}

using ChannelChange = std::function<void(store::StoredChannel&)>;

/// The same harm to one channel, and to all of them.
void add_channel_harm(std::vector<Mutilation>& into, const std::string& name, const ChannelChange& change) {
  into.push_back({name + " (first channel)", [change](store::StoredRun& run, setup::Hookup&) {
                    if (!run.channels.empty()) change(run.channels.front());
                  }});
  into.push_back({name + " (last channel)", [change](store::StoredRun& run, setup::Hookup&) {
                    if (!run.channels.empty()) change(run.channels.back());
                  }});
  into.push_back({name + " (all)", [change](store::StoredRun& run, setup::Hookup&) {
                    for (store::StoredChannel& channel : run.channels) change(channel);
                  }});
}

ChannelChange with_value(double value, std::uint32_t flags) {
  return [=](store::StoredChannel& channel) {
    channel.value.assign(channel.value.size(), value);
    channel.flags.assign(channel.flags.size(), flags);
  };
}

void add_captures(std::vector<Mutilation>& into) {
  const std::vector<std::pair<std::string, std::string>> files = {
      {"empty", ""},
      {"no table", "this is no table\n"},
      {"one row", "Time,Voltage,Current\n0,1,1\n"},
      {"too few cycles", "Time,Voltage,Current\n0,1,1\n0.001,1.1,1\n0.002,1.2,1\n0.003,1,1\n0.004,1,1\n"},
      {"blank", "Time,Voltage,Current\n0,,\n0.001,,\n0.002,,\n0.003,,\n"},
      {"clipped", "Time,Voltage,Current\n0,inf,inf\n0.001,inf,inf\n0.002,inf,inf\n0.003,inf,inf\n"},
      {"other columns", "Time,A,B\n0,1,1\n0.001,2,1\n0.002,3,1\n"},
  };
  for (const auto& [name, bytes] : files) {
    for (const std::string port : {"input", "output"}) {
      into.push_back(
          {"capture of the " + port + ": " + name, [=](store::StoredRun& run, setup::Hookup& hookup) {
             setup::CaptureSource source;
             source.instrument = "scope";
             source.voltage_column = "Voltage";
             source.current_column = "Current";
             source.voltage_gain_percent = source.current_gain_percent = 2.0;
             source.port = port;
             hookup.captures.push_back(source);
             store::StoredCapture capture;
             capture.file_name = "marten-c003.csv";
             capture.instrument = "scope";
             capture.t_ns = *run.steps.front().average_begin_ns + 1;
             capture.bytes = bytes;
             capture.size = static_cast<std::int64_t>(bytes.size());
             run.captures.push_back(capture);
           }});
    }
  }
}

void add_hookups(std::vector<Mutilation>& into) {
  into.push_back({"no accuracy declared", [](store::StoredRun&, setup::Hookup& hookup) {
                    for (setup::Channel& channel : hookup.channels) channel.ranges.clear();
                  }});
  into.push_back({"no ports", [](store::StoredRun&, setup::Hookup& hookup) { hookup.ports.clear(); }});
  into.push_back({"no channels", [](store::StoredRun& run, setup::Hookup& hookup) {
                    run.channels.clear();
                    run.typed.clear();
                    hookup.channels.clear();
                  }});
  into.push_back({"channels that the record has not", [](store::StoredRun& run, setup::Hookup&) {
                    run.channels.clear();
                    run.typed.clear();
                  }});
  into.push_back({"ports without channels", [](store::StoredRun&, setup::Hookup& hookup) {
                    for (setup::Port& port : hookup.ports)
                      port.voltage = port.current = port.power = port.power_factor = "";
                  }});
  into.push_back({"AC ports without a power", [](store::StoredRun&, setup::Hookup& hookup) {
                    for (setup::Port& port : hookup.ports) {
                      port.kind = setup::PortKind::ac;
                      port.power = port.power_factor = "";
                      port.power_factor_low.reset();
                    }
                  }});
  into.push_back({"input not counted", [](store::StoredRun&, setup::Hookup& hookup) {
                    for (setup::Port& port : hookup.ports)
                      port.counted = port.direction != setup::Direction::input;
                  }});
  into.push_back({"a temperature that was never read", [](store::StoredRun&, setup::Hookup& hookup) {
                    hookup.temperatures.push_back({"heatsink", "heatsink", "ambient"});
                  }});
}

void add_windows(std::vector<Mutilation>& into) {
  into.push_back({"step without a window", [](store::StoredRun& run, setup::Hookup&) {
                    run.steps.front().average_begin_ns.reset();
                    run.steps.front().average_end_ns.reset();
                    run.steps.front().state = store::StepState::skipped;
                  }});
  into.push_back({"window without an end", [](store::StoredRun& run, setup::Hookup&) {
                    run.steps.front().average_end_ns.reset();
                    run.steps.front().state = store::StepState::averaging;
                  }});
  into.push_back({"window of no length", [](store::StoredRun& run, setup::Hookup&) {
                    run.steps.front().average_end_ns = run.steps.front().average_begin_ns;
                  }});
  into.push_back({"window after all readings", [](store::StoredRun& run, setup::Hookup&) {
                    run.steps.front().average_begin_ns =
                        *run.steps.front().average_begin_ns + 3'600'000'000'000;
                    run.steps.front().average_end_ns = *run.steps.front().average_begin_ns + 10'000'000'000;
                  }});
  into.push_back({"no steps", [](store::StoredRun& run, setup::Hookup&) { run.steps.clear(); }});
  into.push_back({"stopped run", [](store::StoredRun& run, setup::Hookup&) {
                    run.summary.state = store::RunState::interrupted;
                    run.steps.back().average_end_ns.reset();
                    run.steps.back().state = store::StepState::stopped;
                  }});
}

}  // namespace

std::vector<Mutilation> mutilations() {
  std::vector<Mutilation> all;
  all.push_back({"unharmed", [](store::StoredRun&, setup::Hookup&) {}});
  add_channel_harm(all, "no reading", [](store::StoredChannel& channel) { keep_readings(channel, 0); });
  // The first readings come before the window: as many as end in it with a few.
  add_channel_harm(all, "one reading", [](store::StoredChannel& channel) {
    if (channel.t_ns.empty()) return;
    const std::size_t last = channel.t_ns.size() / 4;
    channel.t_ns.front() = channel.t_ns[last];
    channel.value.front() = channel.value[last];
    keep_readings(channel, 1);
  });
  add_channel_harm(all, "two readings at one instant", [](store::StoredChannel& channel) {
    if (channel.t_ns.size() < 8) return;
    channel.t_ns[0] = channel.t_ns[1] = channel.t_ns[channel.t_ns.size() / 4];
    keep_readings(channel, 2);
  });
  add_channel_harm(all, "all overload", with_value(kNan, instrument::kOverload));
  add_channel_harm(all, "all missing", with_value(kNan, instrument::kMissing));
  add_channel_harm(all, "not a number, and no flag", with_value(kNan, 0));
  add_channel_harm(all, "infinite", with_value(std::numeric_limits<double>::infinity(), 0));
  add_channel_harm(all, "zero", with_value(0.0, 0));
  add_channel_harm(all, "negative", with_value(-1.0, 0));
  add_channel_harm(all, "beyond its ranges", with_value(1e12, 0));
  add_channel_harm(all, "the largest number", with_value(std::numeric_limits<double>::max(), 0));
  add_channel_harm(all, "the least number", with_value(std::numeric_limits<double>::denorm_min(), 0));
  add_windows(all);
  add_hookups(all);
  add_captures(all);
  all.push_back({"typed values taken back", [](store::StoredRun& run, setup::Hookup&) {
                   for (store::StoredTypedAnswer& answer : run.typed) answer.flags |= instrument::kSuperseded;
                 }});
  all.push_back({"typed zeros", [](store::StoredRun& run, setup::Hookup&) {
                   for (store::StoredTypedAnswer& answer : run.typed) answer.value = 0.0;
                 }});
  all.push_back({"typed in one round", [](store::StoredRun& run, setup::Hookup&) {
                   std::erase_if(run.typed,
                                 [](const store::StoredTypedAnswer& one) { return one.round > 1; });
                 }});
  return all;
}

}  // namespace loadstair::simulation
