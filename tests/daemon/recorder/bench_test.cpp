// The recorder over memory links in virtual time.
#include "daemon/recorder/bench.h"

#include <catch2/catch.hpp>
#include <fstream>

#include "daemon/recorder/fake_bench.h"

namespace loadstair::testing {
namespace {

store::RunId begin(FakeBench& bench) {
  store::RunStart start;
  start.prototype = "Marten";
  start.started_ns = bench.clock->now_ns();
  start.utc_offset_ns = kStartUtc;
  for (const auto& channel : bench.bench->hookup().channels) {
    start.channels.push_back({channel.name, channel.instrument, channel.value, channel.unit});
  }
  start.steps = {{"a", 100}, {"b", 200}};
  const auto run = bench.writer->begin_run(start);
  bench.bench->begin_run({run, kStartUtc});
  return run;
}

TEST_CASE("readings reach windows, listeners and snapshot always, the record during a run only") {
  FakeBench bench;
  std::size_t heard = 0;
  const auto listener = bench.bench->on_reading([&](const recorder::ChannelUpdate& update) {
    if (update.channel == 2) ++heard;
  });
  bench.run_for(3);
  CHECK(heard >= 13);  // one each 0.2 s, after connecting
  CHECK(bench.bench->window(2).size() == heard);
  const auto channels = bench.bench->channels();
  REQUIRE(channels.size() == 3);
  CHECK(*channels[2].value == Approx(40).epsilon(1e-4));
  CHECK(channels[2].unit == "degC");
  CHECK(*channels[2].age_s < 0.3);
  CHECK(channels[2].words.empty());
  const auto instruments = bench.bench->instruments();
  REQUIRE(instruments.size() == 3);
  for (const auto& one : instruments) {
    CHECK(one.ready);
    CHECK(one.state == "ready");
    CHECK(one.identity == "FAKE," + one.name + ",1");
  }
  CHECK(bench.has_event("connected"));

  const auto run = begin(bench);
  bench.run_for(2);
  bench.bench->end_run();
  const auto heard_then = heard;
  bench.bench->forget(listener);
  bench.run_for(2);
  CHECK(heard == heard_then);
  const auto stored = bench.stored(run);
  REQUIRE(stored.channels.size() == 3);
  for (const auto& channel : stored.channels) {
    CHECK(channel.t_ns.size() >= 9);
    CHECK(channel.t_ns.size() <= 11);
    CHECK(channel.t_ns.back() <= kStartUtc + bench.clock->now_ns() - 2 * kSecond + kSecond / 100);
  }
}

TEST_CASE("a value that two channels use counts for both, each with its conversion") {
  auto hookup = fake_hookup(false);
  hookup.channels.push_back(linked("through the shunt", "voltage", setup::Quantity::current, "A"));
  hookup.channels.back().conversion.shunt = setup::Shunt{2.0, 0, 0, 0};
  FakeBench bench{hookup};
  bench.world.source_on = true;
  const auto run = begin(bench);
  bench.run_for(2);
  CHECK(*bench.bench->channels()[0].value == Approx(230).epsilon(1e-4));
  CHECK(*bench.bench->channels()[3].value == Approx(115).epsilon(1e-4));  // 230 V over 2 ohm
  const auto stored = bench.stored(run);
  CHECK(stored.channels[3].value == stored.channels[0].value);  // as the meter said it
}

TEST_CASE("a meter that goes silent: flagged, told, and its last value grows old") {
  FakeBench bench;
  bench.run_for(2);
  bench.meter.fault = FakeInstrument::Fault::silent;
  bench.run_for(3);
  const auto now = bench.bench->channels()[0];
  REQUIRE(now.value);
  CHECK(*now.age_s > 2.0);
  CHECK_FALSE(now.words.empty());
  CHECK(bench.has_event("timeout"));
}

TEST_CASE("a clock step is an event with both offsets; readings of the run stay in order") {
  FakeBench bench;
  const auto run = begin(bench);
  bench.run_for(2);
  bench.clock->step_utc(std::chrono::milliseconds{400});
  bench.run_for(1);
  CHECK_FALSE(bench.has_event("clock step"));
  bench.clock->step_utc(std::chrono::seconds{-3600});
  bench.run_for(2);
  const auto stored = bench.stored(run);
  const auto step = std::find_if(stored.events.begin(), stored.events.end(),
                                 [](const auto& event) { return event.kind == "clock step"; });
  REQUIRE(step != stored.events.end());
  CHECK(*step->utc_offset_after_ns - *step->utc_offset_before_ns == -3'599'600'000'000);
  CHECK_THAT(step->text, Catch::Contains("-3599.600 s"));
  const auto& times = stored.channels[0].t_ns;
  CHECK(std::is_sorted(times.begin(), times.end()));
  CHECK(times.back() == Approx(static_cast<double>(kStartUtc + bench.clock->now_ns())).margin(5e8));
}

TEST_CASE("a scope's folder: captures bound to the running step, twice the same once, broken ones told") {
  const TemporaryFolder scope;
  auto hookup = fake_hookup(false);
  setup::Instrument folder;
  folder.name = "scope";
  folder.link.kind = setup::LinkKind::folder;
  folder.link.path = scope.path().string();
  hookup.instruments.push_back(folder);
  FakeBench bench{hookup};
  const auto write = [&](const std::string& name, const std::string& text) {
    std::ofstream{scope.path() / name} << text;
    bench.run_for(1);
  };
  std::vector<recorder::CaptureArrived> arrived;
  bench.bench->on_capture([&](const recorder::CaptureArrived& one) { arrived.push_back(one); });
  bench.run_for(1);
  CHECK(bench.bench->instruments().back().state == "watching folder");
  write("early.csv", "t,v\n0,1\n1e-3,2\n2e-3,3\n");
  CHECK(bench.has_event("capture left out"));
  const auto run = begin(bench);
  bench.bench->set_step(1);
  bench.bench->accept_captures(0);
  write("good.csv", "t,v,i\n0,1,5\n1e-3,2,6\n2e-3,3,7\n3e-3,3,7\n");
  write("again.csv", "t,v,i\n0,1,5\n1e-3,2,6\n2e-3,3,7\n3e-3,3,7\n");
  write("broken.csv", "t,v\n0,1\n1e-3,two\n2e-3,3\n");
  REQUIRE(arrived.size() == 1);
  CHECK(arrived[0].file_name == "good.csv");
  CHECK(arrived[0].step == 1);
  CHECK(arrived[0].samples == 4);
  CHECK(arrived[0].channels == 2);
  CHECK(bench.bench->captures_of_step(1) == 1);
  CHECK(bench.bench->captures_of_step(0) == 0);
  bench.bench->end_run();
  const auto stored = bench.stored(run);
  REQUIRE(stored.captures.size() == 1);
  CHECK(stored.captures[0].bytes == "t,v,i\n0,1,5\n1e-3,2,6\n2e-3,3,7\n3e-3,3,7\n");
  CHECK(stored.captures[0].instrument == "scope");
  const auto refused = std::find_if(stored.events.begin(), stored.events.end(),
                                    [](const auto& event) { return event.kind == "capture refused"; });
  REQUIRE(refused != stored.events.end());
  CHECK_THAT(refused->text, Catch::Contains("broken.csv:3"));
}

TEST_CASE("a capture that the running step cannot have made is kept, for no step, and told") {
  FakeBench bench;
  const auto run = begin(bench);
  bench.run_for(1);
  bench.bench->set_step(1);
  const auto take = [&](const std::string& name, char value) {
    bench.bench->take_capture("scope", name, std::string{"t,v\n0,1\n1e-3,2\n2e-3,"} + value + "\n");
  };
  take("soak.csv", '1');  // saved while the step before it was averaged, as likely as not
  bench.bench->accept_captures(bench.clock->now_ns() + kSecond);
  take("late.csv", '2');
  bench.run_for(2);
  take("own.csv", '3');
  bench.bench->accept_captures(std::nullopt);
  take("after.csv", '4');
  CHECK(bench.bench->captures_of_step(1) == 1);
  bench.bench->end_run();
  const auto stored = bench.stored(run);
  REQUIRE(stored.captures.size() == 4);
  for (const auto& one : stored.captures) CHECK(one.step == (one.file_name == "own.csv" ? 1 : -1));
  const auto told = std::count_if(stored.events.begin(), stored.events.end(),
                                  [](const auto& event) { return event.kind == "capture of no step"; });
  CHECK(told == 3);
  const auto late = std::find_if(stored.events.begin(), stored.events.end(), [](const auto& event) {
    return event.text.find("late.csv was saved 1.0 s before the step's set points") != std::string::npos;
  });
  CHECK(late != stored.events.end());
}

TEST_CASE("a poll loop that a fault ends begins anew, is told, and takes a safe command given at once") {
  FakeBench bench;
  bench.run_for(1);
  int faults = 0;
  bench.bench->on_event([&](const recorder::BenchEvent& event) {
    // Thrown within the load's poll loop, which sends the command, and by whoever is told of the fault.
    if (event.kind == "command sent" && event.text == "SET 100" && faults++ == 0) {
      throw std::logic_error{"a promise was broken"};
    }
    if (event.kind == recorder::kInstrumentFailed) throw std::logic_error{"and another"};
  });
  bench.world.load_on = true;
  bool done = false;
  const auto command = [](FakeBench& on, bool& at_end) -> boost::asio::awaitable<void> {
    const auto set = co_await on.bench->apply("load", "power", 100);
    CHECK_FALSE(set.ok());
    const auto safe = co_await on.bench->make_safe("load");
    REQUIRE(safe.ok());
    CHECK(*safe == recorder::SafeHow::confirmed);
    at_end = true;
  };
  bench.finish(command(bench, done));
  REQUIRE(done);
  CHECK(faults == 1);
  CHECK_FALSE(bench.world.load_on);
  CHECK(bench.bench->may_command("load"));
  CHECK(bench.has_event(std::string{recorder::kInstrumentFailed}));
}

TEST_CASE("a stranger on the line is not read and not commanded") {
  auto hookup = fake_hookup(false);
  hookup.instruments[0].identity = "ANOTHER,meter";
  FakeBench bench{hookup};
  bench.run_for(5);
  CHECK(bench.bench->window(0).empty());
  CHECK_FALSE(bench.bench->instruments()[0].ready);
  CHECK(bench.bench->instruments()[0].state == "wrong identity");
  CHECK(bench.has_event("identity wrong"));
  CHECK_FALSE(bench.bench->channels()[0].value);
}

// g++ 12 awaits again what is awaited within CHECK: awaited first, then checked.
boost::asio::awaitable<void> command(FakeBench& on, bool& at_end) {
  const auto set = co_await on.bench->apply("load", "power", 123.5);
  CHECK(set.ok());
  if (set.ok()) CHECK(set->value_or(0) == 123.5);
  const auto switched = co_await on.bench->switch_on("load");
  CHECK(switched.ok());
  CHECK(on.world.load_on);
  const auto safe = co_await on.bench->make_safe("load");
  CHECK(safe.ok());
  CHECK_FALSE(on.world.load_on);
  const auto nobody = co_await on.bench->apply("nobody", "power", 1);
  CHECK_FALSE(nobody.ok());
  const auto colour = co_await on.bench->apply("load", "colour", 1);
  CHECK_FALSE(colour.ok());
  at_end = true;
}

TEST_CASE("commands by control; an unknown one is refused") {
  FakeBench bench;
  bench.run_for(1);
  bool done = false;
  bench.finish(command(bench, done));
  CHECK(done);
}

}  // namespace
}  // namespace loadstair::testing
