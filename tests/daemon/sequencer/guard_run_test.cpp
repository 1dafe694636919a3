// Each fault of a guarded meter against each guard action, with its expected end state.
#include <catch2/catch.hpp>

#include "daemon/sequencer/run_bench.h"

namespace loadstair::testing {
namespace {

using sequencer::RunPhase;
using sequencer::StepPhase;

enum class Fault { silent, late, garbage, vanish };

struct Row {
  Fault fault;
  setup::MissingAction missing;
  RunPhase end;                 ///< of the run; holding: the power stays on until a person decides
  store::StepState first_step;  ///< what became of the step in which the fault happened
};

const char* word(Fault fault) {
  switch (fault) {
    case Fault::silent:
      return "silent";
    case Fault::late:
      return "late";
    case Fault::garbage:
      return "garbage";
    case Fault::vanish:
      return "vanish";
  }
  return "";
}

void begin(RunBench& bench, Fault fault) {
  switch (fault) {
    case Fault::silent:
      bench.meter.fault = FakeInstrument::Fault::silent;
      break;
    case Fault::late:
      bench.meter.fault = FakeInstrument::Fault::late;
      break;
    case Fault::garbage:
      bench.meter.fault = FakeInstrument::Fault::garbage;
      break;
    case Fault::vanish:
      bench.meter.vanish();
      break;
  }
}

/// Returns: the instant of the end.
std::int64_t end(RunBench& bench) {
  bench.meter.fault = FakeInstrument::Fault::none;
  bench.meter.come_back();
  return bench.clock->now_ns();
}

std::vector<Row> table() {
  std::vector<Row> rows;
  for (const auto fault : {Fault::silent, Fault::late, Fault::garbage, Fault::vanish}) {
    rows.push_back({fault, setup::MissingAction::stop, RunPhase::stopped, store::StepState::stopped});
    rows.push_back({fault, setup::MissingAction::hold, RunPhase::holding, store::StepState::done});
    rows.push_back({fault, setup::MissingAction::next, RunPhase::done, store::StepState::skipped});
    rows.push_back({fault, setup::MissingAction::ignore, RunPhase::done, store::StepState::done});
  }
  return rows;
}

TEST_CASE("each fault against each action: the end state, no wrong value as good, the gap visible") {
  const auto row = GENERATE(from_range(table()));
  CAPTURE(word(row.fault), static_cast<int>(row.missing));
  RunBench bench;
  auto step = quick_step("first", 100);
  step.average_s = 8;
  auto stair = fake_stair({step, quick_step("second", 200)});
  auto guard = guard_on("heatsink");
  guard.above = 95;
  guard.missing = row.missing;
  guard.missing_after_s = 1.5;
  stair.guards.push_back(guard);
  const auto run = bench.start(stair);
  bench.run_to(StepPhase::average);
  bench.run_for(1.0);
  begin(bench, row.fault);
  const auto fault_ns = bench.clock->now_ns();
  std::int64_t back_ns = 0;
  bench.run_for(2.5);

  if (row.end == RunPhase::holding) {
    CHECK(bench.now().phase == RunPhase::holding);
    CHECK(bench.world.source_on);  // the power stays on, and it says so
    CHECK_THAT(bench.now().waits_for, Catch::Contains("power stays on"));
    bench.run_for(20);
    CHECK(bench.now().phase == RunPhase::holding);
    back_ns = end(bench);
    bench.run_for(8);  // it is found again
    REQUIRE(bench.sequencer->resume().ok());
  } else if (row.end == RunPhase::stopped) {
    bench.run_until([&] { return bench.off(); }, 3);
    back_ns = end(bench);
  } else {
    if (row.end == RunPhase::done && row.missing == setup::MissingAction::next) {
      CHECK(bench.now().step == 1);
    }
    bench.run_for(1.0);
    back_ns = end(bench);
  }
  bench.run_to_end();
  CHECK(bench.off());
  CHECK(bench.now().warnings.empty());

  const auto stored = bench.stored(run);
  CHECK(stored.summary.state ==
        (row.end == RunPhase::stopped ? store::RunState::stopped : store::RunState::done));
  CHECK(stored.steps[0].state == row.first_step);
  CHECK(bench.now().trips.empty() == (row.missing == setup::MissingAction::ignore));
  CHECK(bench.has_event("guard") == (row.missing != setup::MissingAction::ignore));

  // Every reading recorded as good is what the meter shows; within the fault there is none, and its gap is
  // visible.
  bool gap = false;
  for (const auto& channel : stored.channels) {
    for (std::size_t i = 0; i < channel.t_ns.size(); ++i) {
      const auto t_ns = channel.t_ns[i] - kStartUtc;
      const bool usable = (channel.flags[i] & instrument::kUnusable) == 0U;
      if (!usable) gap = true;
      if (!usable) continue;
      CHECK_FALSE((t_ns > fault_ns + kSecond / 2 && t_ns < back_ns));
      if (channel.entry.name == "heatsink") CHECK(channel.value[i] == Approx(40).epsilon(2e-5));
      if (channel.entry.name == "output voltage" && channel.value[i] > 1) {
        CHECK(channel.value[i] == Approx(230).epsilon(2e-5));
      }
      if (channel.entry.name == "output power" && channel.value[i] > 1) {
        CHECK(std::abs(std::remainder(channel.value[i], 100.0)) < 0.01);
      }
    }
  }
  const bool told = bench.has_event("timeout") || bench.has_event("garbage") || bench.has_event("lost");
  CHECK((gap || told));
  CHECK(told);
}

TEST_CASE("a limit against each action") {
  const auto action = GENERATE(setup::GuardAction::stop, setup::GuardAction::hold, setup::GuardAction::next);
  CAPTURE(static_cast<int>(action));
  RunBench bench;
  auto step = quick_step("first", 100);
  step.average_s = 5;
  auto stair = fake_stair({step, quick_step("second", 200)});
  auto guard = guard_on("heatsink");
  guard.above = 95;
  guard.debounce_s = 0.6;
  guard.action = action;
  stair.guards.push_back(guard);
  const auto run = bench.start(stair);
  bench.run_to(StepPhase::average);
  // A spike shorter than the debounce time.
  bench.world.heat_c = 99;
  bench.run_for(0.3);
  bench.world.heat_c = 60;
  bench.run_for(1.0);
  CHECK(bench.now().trips.empty());
  CHECK(bench.now().step_phase == StepPhase::average);
  REQUIRE(bench.now().guards.size() == 1);
  CHECK(*bench.now().guards[0].margin == Approx(35).margin(0.01));
  bench.world.heat_c = 99;
  bench.run_until([&] { return !bench.now().trips.empty(); }, 1.5);
  CHECK_THAT(bench.now().trips[0].text, Catch::Contains("above 95 degC"));
  bench.run_for(0.1);
  switch (action) {
    case setup::GuardAction::stop:
      CHECK(bench.off());
      bench.run_to_end();
      CHECK(bench.now().phase == RunPhase::stopped);
      CHECK(bench.stored(run).steps[0].state == store::StepState::stopped);
      CHECK_THAT(bench.stored(run).end_reason, Catch::Contains("guard \"guard of heatsink\""));
      break;
    case setup::GuardAction::hold: {
      CHECK(bench.now().phase == RunPhase::holding);
      CHECK(bench.world.source_on);
      bench.world.heat_c = 60;
      bench.run_for(2);
      REQUIRE(bench.sequencer->resume().ok());
      const auto resumed_ns = bench.clock->now_ns();
      bench.run_to_end();
      const auto stored = bench.stored(run);
      CHECK(stored.summary.state == store::RunState::done);
      // The window that was broken is not used: a new one, after a new soak.
      CHECK(*stored.steps[0].soak_begin_ns - kStartUtc >= resumed_ns);
      CHECK(*stored.steps[0].average_begin_ns > *stored.steps[0].soak_begin_ns);
      break;
    }
    case setup::GuardAction::next:
      bench.world.heat_c = 60;
      bench.run_to_end();
      CHECK(bench.stored(run).steps[0].state == store::StepState::skipped);
      CHECK(bench.stored(run).steps[1].state == store::StepState::done);
      break;
  }
}

TEST_CASE("held, and then stopped or left by the person") {
  RunBench bench;
  auto stair = fake_stair({quick_step("first", 100), quick_step("second", 200)});
  auto guard = guard_on("heatsink");
  guard.above = 95;
  guard.action = setup::GuardAction::hold;
  stair.guards.push_back(guard);
  auto overvoltage = guard_on("output voltage");
  overvoltage.above = 264;
  stair.guards.push_back(overvoltage);
  stair.end.discharge_s = 0;
  const auto run = bench.start(stair);
  bench.run_to(StepPhase::average);
  bench.world.heat_c = 99;
  bench.run_to(StepPhase::hold);
  SECTION("resumed while still beyond: it is held again") {
    REQUIRE(bench.sequencer->resume().ok());
    bench.run_for(0.5);
    CHECK(bench.now().phase == RunPhase::holding);
    CHECK(bench.now().trips.size() == 2);
  }
  SECTION("stopped") {
    REQUIRE(bench.sequencer->stop("too hot for me").ok());
    bench.run_to_end();
    CHECK(bench.off());
    CHECK(bench.stored(run).summary.state == store::RunState::stopped);
  }
  SECTION("left") {
    bench.world.heat_c = 60;
    REQUIRE(bench.sequencer->skip("next").ok());
    bench.run_to_end();
    CHECK(bench.stored(run).steps[0].state == store::StepState::skipped);
    CHECK(bench.stored(run).steps[1].state == store::StepState::done);
  }
  SECTION("a guard that stops wins over the hold") {
    bench.world.voltage = 300.0;
    bench.run_for(1);
    CHECK(bench.now().phase == RunPhase::stopped);
    CHECK(bench.off());
    CHECK_THAT(bench.now().reason, Catch::Contains("output voltage is 299.998 V, above 264 V"));
  }
}

TEST_CASE("blanking lets the inrush of a set-point change pass, and no longer") {
  const double sag_s = GENERATE(0.8, 3.0);
  CAPTURE(sag_s);
  RunBench bench;
  auto second = quick_step("second", 200);
  second.average_s = 6;
  auto stair = fake_stair({quick_step("first", 100), second});
  auto guard = guard_on("output voltage");
  guard.below = 195;
  guard.blanking_s = 1.5;
  stair.guards.push_back(guard);
  const auto run = bench.start(stair);
  bench.run_until([&] { return bench.load.last("SET 200") > 0; });
  bench.world.voltage = 100.0;
  bench.run_for(sag_s);
  bench.world.voltage.reset();
  bench.run_to_end();
  CHECK(bench.stored(run).summary.state == (sag_s < 1.5 ? store::RunState::done : store::RunState::stopped));
}

TEST_CASE("a heatsink meter in overload stops the run, although missing readings are ignored") {
  RunBench bench;
  auto step = quick_step("first", 100);
  step.average_s = 10;
  auto stair = fake_stair({step});
  auto guard = guard_on("heatsink");
  guard.above = 95;
  guard.debounce_s = 0.5;
  guard.missing = setup::MissingAction::ignore;
  stair.guards.push_back(guard);
  bench.start(stair);
  bench.run_to(StepPhase::average);
  bench.meter.answers["READ?"] = [] { return std::string{"2.3E2,1.0E2,9.9E37"}; };
  bench.run_until([&] { return bench.off(); }, 2.0);
  bench.run_to_end();
  CHECK(bench.now().phase == RunPhase::stopped);
  CHECK_THAT(bench.now().reason, Catch::Contains("heatsink is overloaded"));
}

TEST_CASE("an overload of the meter of a lower limit is missing, never a value") {
  RunBench bench;
  auto step = quick_step("first", 100);
  step.average_s = 10;
  auto stair = fake_stair({step});
  auto guard = guard_on("heatsink");
  guard.below = 0;  // 9.9E37 is above every limit that a careless reader would compare it with
  guard.missing_after_s = 1.0;
  stair.guards.push_back(guard);
  const auto run = bench.start(stair);
  bench.run_to(StepPhase::average);
  bench.meter.answers["READ?"] = [] { return std::string{"2.3E2,1.0E2,9.9E37"}; };
  bench.run_to_end();
  CHECK(bench.now().phase == RunPhase::stopped);
  CHECK_THAT(bench.now().reason, Catch::Contains("no usable reading of heatsink"));
  const auto stored = bench.stored(run);
  for (std::size_t i = 0; i < stored.channels[2].flags.size(); ++i) {
    if ((stored.channels[2].flags[i] & instrument::kUnusable) == 0U) CHECK(stored.channels[2].value[i] < 100);
  }
}

}  // namespace
}  // namespace loadstair::testing
