// A bench for tests, in virtual time: a source, a load and a meter that are small responders, and two typed
// channels. The record is a file of its own.
#pragma once

#include <algorithm>
#include <boost/asio/io_context.hpp>
#include <catch2/catch.hpp>
#include <cmath>
#include <cstdlib>
#include <filesystem>
#include <functional>
#include <memory>
#include <string>

#include "analysis/base/number.h"
#include "daemon/recorder/bench.h"
#include "daemon/recorder/fake_instrument.h"
#include "daemon/setup/hookup.h"
#include "daemon/setup/stair.h"
#include "daemon/store/reader.h"
#include "daemon/store/record.h"
#include "drivers/link/clock.h"
#include "drivers/link/task_scope.h"

namespace loadstair::testing {

inline constexpr std::int64_t kSecond = 1'000'000'000;
inline constexpr std::int64_t kStartUtc = 1'790'000'000 * kSecond;

class TemporaryFolder {
 public:
  TemporaryFolder() {
    std::string name = (std::filesystem::temp_directory_path() / "loadstair-test-XXXXXX").string();
    path_ = mkdtemp(name.data());
  }
  ~TemporaryFolder() {
    std::error_code ignored;
    std::filesystem::remove_all(path_, ignored);
  }
  TemporaryFolder(const TemporaryFolder&) = delete;
  TemporaryFolder& operator=(const TemporaryFolder&) = delete;
  [[nodiscard]] const std::filesystem::path& path() const { return path_; }

 private:
  std::filesystem::path path_;
};

inline instrument::Profile control_profile(const std::string& setting, const std::string& switch_word) {
  instrument::Profile profile;
  profile.name = "fake-" + setting;
  profile.values = {{"power", "W", ""}};
  profile.queries = {{"MEAS:POW?", {"power"}}};
  profile.settings = {{setting, "V", "SET {value}", "SET?", 0.01}};
  profile.on_commands = {switch_word + " ON"};
  profile.safe = instrument::ProfileSafe{{switch_word + " OFF"}, switch_word + "?", "0"};
  profile.timeout_s = 0.5;
  profile.free_running = false;
  return profile;
}

inline setup::Instrument instrument_of(const std::string& name, instrument::Profile profile, double poll_s) {
  setup::Instrument made;
  made.name = name;
  made.profile_name = profile.name;
  made.profile = std::move(profile);
  made.link.kind = setup::LinkKind::tcp;
  made.identity = "FAKE," + name;
  made.poll_s = poll_s;
  return made;
}

inline setup::Channel linked(const std::string& name, const std::string& value, setup::Quantity quantity,
                             const std::string& unit) {
  setup::Channel channel;
  channel.name = name;
  channel.instrument = "meter";
  channel.value = value;
  channel.quantity = quantity;
  channel.unit = unit;
  setup::RangeSpec range;
  range.upto = 1000;
  range.resolution = 0.001;
  channel.ranges = {range};
  return channel;
}

inline setup::Channel typed(const std::string& name, setup::Quantity quantity, const std::string& unit,
                            double low, double high) {
  setup::Channel channel;
  channel.name = name;
  channel.typed = true;
  channel.quantity = quantity;
  channel.unit = unit;
  channel.low = low;
  channel.high = high;
  setup::RangeSpec range;
  range.upto = 600;
  range.resolution = 0.1;
  channel.ranges = {range};
  return channel;
}

/// What the tests may change of the hook-up before the bench is built.
inline setup::Hookup fake_hookup(bool with_typed) {
  setup::Hookup hookup;
  hookup.bench = "test bench";
  hookup.text = "{}";
  instrument::Profile meter;
  meter.name = "fake-meter";
  meter.values = {{"voltage", "V", ""}, {"power", "W", ""}, {"heat", "degC", ""}};
  meter.queries = {{"READ?", {"voltage", "power", "heat"}}};
  meter.timeout_s = 0.5;
  meter.free_running = false;
  hookup.instruments = {instrument_of("meter", meter, 0.2),
                        instrument_of("source", control_profile("voltage", "OUTP"), 1.0),
                        instrument_of("load", control_profile("power", "INP"), 1.0)};
  hookup.channels = {linked("output voltage", "voltage", setup::Quantity::voltage, "V"),
                     linked("output power", "power", setup::Quantity::power, "W"),
                     linked("heatsink", "heat", setup::Quantity::temperature, "degC")};
  if (with_typed) {
    hookup.channels.push_back(typed("input voltage", setup::Quantity::voltage, "V", 300, 420));
    hookup.channels.push_back(typed("input current", setup::Quantity::current, "A", 0, 3));
  }
  setup::Control source{"source", "source", "source", {{"voltage", 385}}};
  setup::Control load{"load", "load", "load", {}};
  hookup.controls = {source, load};
  return hookup;
}

inline setup::Step fake_step(const std::string& label, double power_w) {
  setup::Step step;
  step.label = label;
  step.load_w = power_w;
  step.set = {{"load", "power", power_w}};
  step.soak_s = 1.0;
  step.average_s = 2.0;
  return step;
}

inline setup::Stair fake_stair(std::vector<setup::Step> steps) {
  setup::Stair stair;
  stair.file = "test.stair.json";
  stair.text = "{}";
  stair.prototype = {"Marten", "C", "C-003"};
  stair.steps = std::move(steps);
  stair.end = {0.0, 1.0};
  return stair;
}

/// The simulated world: what the responders answer.
struct World {
  bool source_on = false, load_on = false;
  double voltage_set = 0.0, power_set = 0.0;
  double heat_c = 40.0;
  std::function<double(double t_s)> heat;    ///< when set: instead of heat_c
  std::optional<double> voltage;             ///< when set: whatever the source does
  std::function<std::string()> source_echo;  ///< when set: what SET? answers
};

class FakeBench {
 public:
  explicit FakeBench(setup::Hookup hookup = fake_hookup(false), recorder::BenchOptions options = {})
      : clock{link::VirtualClock::make(io, kStartUtc)},
        meter{io.get_executor(), *clock, "FAKE,meter,1"},
        source{io.get_executor(), *clock, "FAKE,source,1"},
        load{io.get_executor(), *clock, "FAKE,load,1"} {
    auto opened = store::Record::open((folder.path() / "record.db").string(), store::Mode::write);
    REQUIRE(opened.ok());
    record = std::make_unique<store::Record>(std::move(opened).value());
    store::WriterOptions writer_options;
    writer_options.threaded = false;
    writer_options.batch_items = 1'000'000;
    writer_options.utc_offset_ns = kStartUtc;
    auto started = store::Writer::start(*record, writer_options);
    REQUIRE(started.ok());
    writer = std::move(started).value();
    connect();
    options.opener_for = [this](const setup::Instrument& instrument) {
      return instrument.name == "meter"  ? meter.opener()
             : instrument.name == "load" ? load.opener()
                                         : source.opener();
    };
    bench = std::make_unique<recorder::Bench>(std::move(hookup), *clock, io.get_executor(), *writer,
                                              std::move(options));
    bench->start();
  }
  ~FakeBench() { close(); }
  FakeBench(const FakeBench&) = delete;
  FakeBench& operator=(const FakeBench&) = delete;

  [[nodiscard]] double now_s() const { return static_cast<double>(clock->now_ns()) * 1e-9; }
  void run_for(double length_s) { clock->run(clock->now_ns() + std::llround(length_s * 1e9)); }
  /// Runs until `condition`; fails the test when it does not come within `limit_s`.
  void run_until(const std::function<bool()>& condition, double limit_s = 60.0) {
    const auto limit = clock->now_ns() + std::llround(limit_s * 1e9);
    while (!condition()) {
      REQUIRE(clock->now_ns() < limit);
      clock->run(clock->now_ns() + kSecond / 50);
    }
  }
  /// Runs a coroutine to its end.
  void finish(boost::asio::awaitable<void> task) {
    link::TaskScope scope{io.get_executor(), [](std::exception_ptr e) { std::rethrow_exception(e); }};
    scope.spawn(std::move(task));
    while (scope.size() != 0) clock->run(clock->now_ns() + kSecond / 100);
  }
  void close() {
    if (closed_) return;
    closed_ = true;
    finish(bench->close());
    for (auto* one : {&meter, &source, &load}) one->close();
    run_for(0.1);
  }
  /// The run as it is in the record now.
  [[nodiscard]] store::StoredRun stored(store::RunId run) const {
    const auto flushed = writer->flush();
    REQUIRE(flushed.ok());
    const auto reader = record->reader();
    REQUIRE(reader.ok());
    auto loaded = reader->load_run(run);
    REQUIRE(loaded.ok());
    return std::move(loaded).value();
  }
  [[nodiscard]] std::vector<store::StoredEvent> events() const {
    const auto flushed = writer->flush();
    REQUIRE(flushed.ok());
    const auto reader = record->reader();
    REQUIRE(reader.ok());
    return reader->events(0, 100000).value();
  }
  [[nodiscard]] bool has_event(const std::string& kind) const {
    const auto all = events();
    return std::any_of(all.begin(), all.end(), [&kind](const auto& event) { return event.kind == kind; });
  }

  TemporaryFolder folder;
  boost::asio::io_context io{1};
  std::unique_ptr<link::VirtualClock> clock;
  World world;
  FakeInstrument meter, source, load;
  std::unique_ptr<store::Record> record;
  std::unique_ptr<store::Writer> writer;
  std::unique_ptr<recorder::Bench> bench;

 private:
  void connect() {
    const auto number = [](const std::string& text) { return base::parse_number(text.substr(4)).value(); };
    source.on_command = [this, number](const std::string& line) {
      if (line.starts_with("SET ")) world.voltage_set = number(line);
      if (line.starts_with("OUTP ")) world.source_on = line == "OUTP ON";
    };
    source.answers["SET?"] = [this] {
      return world.source_echo ? world.source_echo() : base::print_number(world.voltage_set);
    };
    source.answers["OUTP?"] = [this] { return std::string{world.source_on ? "1" : "0"}; };
    source.answers["MEAS:POW?"] = [this] {
      return base::print_number(world.source_on ? world.power_set : 0.0);
    };
    load.on_command = [this, number](const std::string& line) {
      if (line.starts_with("SET ")) world.power_set = number(line);
      if (line.starts_with("INP ")) world.load_on = line == "INP ON";
    };
    load.answers["SET?"] = [this] { return base::print_number(world.power_set); };
    load.answers["INP?"] = [this] { return std::string{world.load_on ? "1" : "0"}; };
    load.answers["MEAS:POW?"] = [this] { return base::print_number(world.load_on ? world.power_set : 0.0); };
    meter.answers["READ?"] = [this] {
      const bool on = world.source_on && world.load_on;
      // A small ripple, so that no reply repeats the one before.
      const double ripple = 1e-5 * std::sin(7.0 * now_s());
      const double voltage = world.voltage.value_or(world.source_on ? 230.0 : 0.0);
      const double heat = world.heat ? world.heat(now_s()) : world.heat_c;
      return base::print_scientific(voltage * (1 + ripple), 6) + "," +
             base::print_scientific((on ? world.power_set : 0.0) * (1 + ripple), 6) + "," +
             base::print_scientific(heat * (1 + ripple), 6);
    };
  }
  bool closed_ = false;
};

}  // namespace loadstair::testing
