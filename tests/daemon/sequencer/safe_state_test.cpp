// The safe state where things go wrong: instruments gone, strangers, a crash before, a record that cannot be
// written.
#include <catch2/catch.hpp>
#include <stdexcept>

#include "daemon/sequencer/run_bench.h"
#include "daemon/store/faulty_disk.h"

namespace loadstair::testing {
namespace {

using sequencer::RunPhase;
using sequencer::StepPhase;

TEST_CASE("a load that has vanished does not keep the source on; it is made safe when it comes back") {
  RunBench bench;
  bench.start(fake_stair({quick_step("a", 100)}));
  bench.run_to(StepPhase::average);
  bench.load.vanish();
  bench.run_for(0.1);
  REQUIRE(bench.sequencer->stop("enough").ok());
  bench.run_until([&] { return !bench.world.source_on; }, 1.5);
  CHECK(bench.world.load_on);
  bench.run_to_end();
  REQUIRE(bench.now().warnings.size() == 1);
  CHECK_THAT(bench.now().warnings[0], Catch::Contains("THE SAFE STATE OF load IS NOT CONFIRMED"));
  CHECK_THAT(bench.now().warnings[0], Catch::Contains("prove dead with a tester"));
  CHECK(bench.has_event("safe state not confirmed"));
  const auto refused = bench.sequencer->start(fake_stair({quick_step("a", 100)}));
  REQUIRE_FALSE(refused.ok());
  CHECK_THAT(refused.refusal().text(), Catch::Contains("safe state is not confirmed"));

  bench.load.come_back();
  bench.run_until([&] { return !bench.world.load_on; }, 15);
  bench.run_until([&] { return bench.now().warnings.empty(); }, 2);
  CHECK(bench.sequencer->start(fake_stair({quick_step("a", 100)})).ok());
  bench.run_to_end();
}

TEST_CASE("a mute load is switched off at once and said to be unconfirmed") {
  RunBench bench;
  bench.start(fake_stair({quick_step("a", 100)}));
  bench.run_to(StepPhase::average);
  bench.load.fault = FakeInstrument::Fault::silent;
  bench.run_until([&] { return bench.load.last("MEAS:POW?") > bench.clock->now_ns() - kSecond / 10; });
  REQUIRE(bench.sequencer->stop("enough").ok());
  bench.run_until([&] { return bench.off(); }, 1.5);  // it obeys, although a reply is outstanding
  bench.run_to_end();
  REQUIRE(bench.now().warnings.size() == 1);
}

TEST_CASE("after a crash: safe as soon as the instruments are there") {
  RunBench bench;
  bench.world.source_on = bench.world.load_on = true;
  bench.finish(bench.sequencer->make_safe_after_crash({}));
  CHECK(bench.off());
  CHECK(bench.load.last("INP OFF") <= bench.source.last("OUTP OFF"));
  CHECK(bench.now().phase == RunPhase::idle);
  CHECK(bench.now().warnings.empty());
  CHECK(bench.has_event("interrupted"));
  bench.start(fake_stair({quick_step("a", 100)}));
  bench.run_to_end();
  CHECK(bench.now().phase == RunPhase::done);
}

TEST_CASE("after a crash: nothing is sent to a stranger") {
  auto hookup = fake_hookup(false);
  hookup.instruments[2].identity = "ANOTHER,load";
  RunBench bench{hookup};
  bench.world.source_on = bench.world.load_on = true;
  bench.finish(bench.sequencer->make_safe_after_crash({}));
  CHECK_FALSE(bench.world.source_on);
  CHECK(bench.world.load_on);
  for (const auto& one : bench.load.heard) CHECK(one.line == "*IDN?");
  REQUIRE(bench.now().warnings.size() == 1);
  CHECK_THAT(bench.now().warnings[0], Catch::Contains("load"));
  CHECK_FALSE(bench.sequencer->start(fake_stair({quick_step("a", 100)})).ok());
}

std::vector<store::RunId> owed_after_restart(RunBench& bench) {
  bench.end();
  REQUIRE(bench.writer->close().ok());
  bench.writer.reset();
  const auto owed = bench.record->owed_safe_states();
  REQUIRE(owed.ok());
  return *owed;
}

TEST_CASE("the record owes a safe state until it is confirmed, over a restart too") {
  RunBench bench;
  const auto run = bench.start(fake_stair({quick_step("a", 100)}));
  bench.run_to(StepPhase::average);
  SECTION("a run that ended safe owes none") {
    bench.run_to_end();
    CHECK(owed_after_restart(bench).empty());
  }
  SECTION("a load that never confirmed") {
    bench.load.vanish();
    bench.run_for(0.1);
    REQUIRE(bench.sequencer->stop("enough").ok());
    bench.run_to_end();
    SECTION("owes it") {
      CHECK(owed_after_restart(bench) == std::vector<store::RunId>{run});
    }
    SECTION("and no more when it came back; what is told then is told of this run") {
      bench.load.come_back();
      bench.run_until([&] { return bench.now().warnings.empty(); }, 15);
      bench.run_for(1);
      const auto stored = bench.stored(run);
      CHECK(std::any_of(stored.events.begin(), stored.events.end(), [](const auto& event) {
        return event.text == "load is in its safe state, read back";
      }));
      CHECK(owed_after_restart(bench).empty());
    }
  }
}

TEST_CASE("after a crash the owed safe states are paid only when every control has confirmed") {
  RunBench bench;
  store::RunId crashed = 0;
  {
    // What a daemon leaves that died in mid-run.
    store::RunStart start;
    start.utc_offset_ns = kStartUtc;
    crashed = bench.writer->begin_run(start);
  }
  bench.world.source_on = bench.world.load_on = true;
  const bool comes = GENERATE(true, false);
  if (!comes) bench.load.vanish();
  bench.finish(bench.sequencer->make_safe_after_crash({crashed}));
  CHECK_FALSE(bench.world.source_on);
  CHECK(bench.world.load_on == !comes);
  CHECK(owed_after_restart(bench) == (comes ? std::vector<store::RunId>{} : std::vector{crashed}));
}

TEST_CASE("a safe state that its instrument cannot confirm: sent, one warning, and the next run may start") {
  auto hookup = fake_hookup(false);
  hookup.instruments[2].profile.safe = instrument::ProfileSafe{{"INP OFF"}, "", ""};
  RunBench bench{hookup};
  bench.start(fake_stair({quick_step("a", 100)}));
  bench.run_to_end();
  CHECK(bench.off());
  REQUIRE(bench.now().warnings.size() == 1);
  CHECK_THAT(bench.now().warnings[0],
             Catch::Contains("THE SAFE STATE OF load WAS SENT AND CANNOT BE CONFIRMED"));
  const auto sent = bench.load.count("INP OFF");
  bench.run_for(5);
  CHECK(bench.load.count("INP OFF") == sent);
  const auto events = bench.events();
  CHECK(std::count_if(events.begin(), events.end(),
                      [](const auto& event) { return event.kind == "safe state not confirmed"; }) == 1);
  bench.start(fake_stair({quick_step("a", 100)}));
  bench.run_to_end();
  CHECK(owed_after_restart(bench).empty());
}

TEST_CASE("a control that no command makes safe is told, and keeps no run from starting") {
  auto hookup = fake_hookup(false);
  hookup.instruments[2].profile.safe.reset();
  RunBench bench{hookup};
  bench.start(fake_stair({quick_step("a", 100)}));
  bench.run_to_end();
  REQUIRE(bench.now().warnings.size() == 1);
  CHECK_THAT(bench.now().warnings[0], Catch::Contains("NOTHING IN ITS PROFILE MAKES load SAFE"));
  bench.start(fake_stair({quick_step("a", 100)}));
  bench.run_to_end();
  CHECK(owed_after_restart(bench).empty());
}

TEST_CASE("a fault while one control is made safe: the others go on, and what is not confirmed is told") {
  RunBench bench;
  bench.bench->on_event([](const recorder::BenchEvent& event) {
    if (event.kind == "safe state") throw std::logic_error{"a promise was broken"};
  });
  bench.start(fake_stair({quick_step("a", 100)}));
  bench.run_to(StepPhase::average);
  bench.source.fault = FakeInstrument::Fault::silent;
  REQUIRE(bench.sequencer->stop("enough").ok());
  bench.run_for(1.0);
  CHECK(bench.off());
  CHECK(bench.sequencer->busy());  // the source has not confirmed and is still asked
  bench.run_to_end();
  REQUIRE(bench.now().warnings.size() == 1);
  CHECK_THAT(bench.now().warnings[0], Catch::Contains("THE SAFE STATE OF source IS NOT CONFIRMED"));
  CHECK(bench.has_event("safe state not confirmed"));
  CHECK(bench.has_event("broken"));
}

TEST_CASE("a fault in a control's poll loop stops the run, and the control is made safe all the same") {
  RunBench bench;
  bool thrown = false;
  bench.bench->on_event([&](const recorder::BenchEvent& event) {
    if (event.kind != "command sent" || event.text != "SET 200" || thrown) return;
    thrown = true;
    throw std::logic_error{"a promise was broken"};
  });
  const auto run = bench.start(fake_stair({quick_step("a", 100), quick_step("b", 200)}));
  bench.run_until([&] { return bench.world.load_on; });
  bench.run_to_end();
  CHECK(thrown);
  CHECK(bench.off());
  CHECK(bench.now().warnings.empty());
  CHECK(bench.now().phase == RunPhase::stopped);
  CHECK_THAT(bench.now().reason, Catch::Contains("load: a fault of the program ended its poll loop"));
  CHECK(bench.stored(run).summary.state == store::RunState::stopped);
}

TEST_CASE("closing stops the run, makes it safe, and says when a discharge was cut short") {
  RunBench bench;
  auto stair = fake_stair({quick_step("a", 100)});
  stair.end.discharge_s = 60;
  const auto run = bench.start(stair);
  bench.run_to(StepPhase::average);
  const auto before_ns = bench.clock->now_ns();
  bench.finish(bench.sequencer->close("SIGTERM"));
  CHECK(bench.off());
  CHECK(bench.clock->now_ns() - before_ns < 3 * kSecond);
  CHECK_FALSE(bench.sequencer->busy());
  const auto stored = bench.stored(run);
  CHECK(stored.summary.state == store::RunState::stopped);
  CHECK(stored.end_reason == "SIGTERM");
  const auto events = bench.events();
  CHECK(std::any_of(events.begin(), events.end(), [](const auto& event) {
    return event.kind == "discharge" && event.text.find("before the time was over") != std::string::npos;
  }));
}

TEST_CASE("a record that cannot be written stops the run, and never delays the safe state") {
  store_tests::FaultyDisk disk;
  RunBench bench;
  bench.start(fake_stair({fake_step("a", 100)}));
  bench.run_to(StepPhase::average);
  disk.fail(1, INT64_MAX / 2, SQLITE_FULL);
  CHECK_FALSE(bench.writer->flush().ok());
  const auto failed_ns = bench.clock->now_ns();
  bench.run_until([&] { return bench.off(); }, 1.0);
  CHECK(bench.clock->now_ns() - failed_ns < kSecond / 2);
  bench.run_to_end();
  CHECK(bench.now().phase == RunPhase::stopped);
  CHECK_THAT(bench.now().reason, Catch::Contains("the record cannot be written"));
  CHECK_FALSE(bench.sequencer->start(fake_stair({quick_step("a", 100)})).ok());
  // Nothing that was posted is lost when the disk is there again.
  disk.fail(INT64_MAX / 2, 1, SQLITE_FULL);
  const auto stored = bench.stored(1);
  CHECK(stored.summary.state == store::RunState::stopped);
  CHECK(stored.channels[0].t_ns.size() > 5);
}

TEST_CASE("a fault of the program ends the run in its safe state") {
  auto hookup = fake_hookup(false);
  hookup.captures.push_back({});
  sequencer::SequencerOptions options;
  options.request_capture = [](const std::string&) { throw std::logic_error{"a promise was broken"}; };
  RunBench bench{hookup, options};
  auto step = quick_step("a", 100);
  step.capture = true;
  const auto run = bench.start(fake_stair({step}));
  bench.run_to_end();
  CHECK(bench.off());
  CHECK(bench.now().phase == RunPhase::stopped);
  CHECK_THAT(bench.now().reason, Catch::Contains("a promise was broken"));
  CHECK(bench.stored(run).summary.state == store::RunState::stopped);
  CHECK(bench.stored(run).steps[0].state == store::StepState::stopped);
  CHECK(bench.has_event("broken"));
}

TEST_CASE("a command that is under way when the run is stopped does not have the last word") {
  RunBench bench;
  bench.run_until([&] { return bench.bench->may_command("load") && bench.bench->may_command("source"); });
  bench.start(fake_stair({quick_step("a", 100)}));
  // Stopped while each command of the start is out, one instant after the other.
  const double at_s = GENERATE(range(0, 30)) * 0.004;
  bench.run_for(at_s);
  if (bench.sequencer->stop("enough").ok()) {
    bench.run_to_end();
    CHECK(bench.off());
    CHECK(bench.load.last("INP ON") <= bench.load.last("INP OFF"));
    CHECK(bench.source.last("OUTP ON") <= bench.source.last("OUTP OFF"));
  }
}

}  // namespace
}  // namespace loadstair::testing
