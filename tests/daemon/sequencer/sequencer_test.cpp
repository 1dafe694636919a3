// Whole runs in virtual time. What is expected follows from the stair's definition (daemon/setup/stair.h),
// docs/methods.md section 5 and the cautions of README.md; the responders know nothing of the sequencer.
#include "daemon/sequencer/sequencer.h"

#include <catch2/catch.hpp>
#include <stdexcept>
#include <thread>

#include "daemon/sequencer/run_bench.h"

namespace loadstair::testing {
namespace {

using sequencer::PromptKind;
using sequencer::RunPhase;
using sequencer::StepPhase;

/// Readings of a channel within an averaging window, all of them usable.
std::size_t usable_in_window(const store::StoredChannel& channel, const store::StoredStep& step) {
  std::size_t count = 0;
  for (std::size_t i = 0; i < channel.t_ns.size(); ++i) {
    if (channel.t_ns[i] < *step.average_begin_ns || channel.t_ns[i] > *step.average_end_ns) continue;
    if ((channel.flags[i] & instrument::kUnusable) == 0U) ++count;
  }
  return count;
}

TEST_CASE("a whole stair with linked channels") {
  RunBench bench;
  auto light = fake_step("100 W", 100);
  light.electrical = setup::ElectricalSettle{"output power", 5.0, 2.0};
  light.settle_limit_s = 30;
  auto full = fake_step("600 W", 600);
  full.thermal = setup::ThermalSettle{"heatsink", 0.5, 2.0, 2, 0.0, true, 1.0, 0.0};
  full.settle_limit_s = 60;
  // One time constant of 3 s after the load has come. A window of 2 s holds no more than 0.5 K when it ends
  // at 3 s * ln(40 * (e^(2/3) - 1) / 0.5) = 12.98 s or later; two such windows, one after the other: 14.98 s.
  bench.world.heat = [&](double t_s) {
    const auto set_ns = bench.load.last("SET 600");
    if (set_ns < 0) return 30.0;
    return 30.0 + 40.0 * (1.0 - std::exp(-(t_s - static_cast<double>(set_ns) * 1e-9) / 3.0));
  };
  std::vector<StepPhase> phases;
  const auto run = bench.start(fake_stair({light, full}));
  CHECK(run == 1);
  bench.run_until(
      [&] {
        if (phases.empty() || phases.back() != bench.now().step_phase)
          phases.push_back(bench.now().step_phase);
        return !bench.sequencer->busy();
      },
      120);
  CHECK(bench.now().phase == RunPhase::done);
  CHECK(bench.now().warnings.empty());
  CHECK(bench.off());
  for (const auto phase : {StepPhase::soak, StepPhase::settle, StepPhase::average, StepPhase::safe_state}) {
    CHECK(std::find(phases.begin(), phases.end(), phase) != phases.end());
  }

  // Limits and first set point before power, source before load; off in the order load, source.
  CHECK(bench.source.last("SET 385") < bench.source.last("OUTP ON"));
  CHECK(bench.load.heard.front().line == "*IDN?");
  const auto load_set = std::find_if(bench.load.heard.begin(), bench.load.heard.end(),
                                     [](const auto& one) { return one.line == "SET 100"; });
  REQUIRE(load_set != bench.load.heard.end());
  CHECK(load_set->t_ns < bench.load.last("INP ON"));
  CHECK(bench.source.last("OUTP ON") < bench.load.last("INP ON"));
  CHECK(bench.load.last("INP OFF") < bench.source.last("OUTP OFF"));
  CHECK(bench.load.last("INP ON") < bench.load.last("INP OFF"));

  const auto stored = bench.stored(run);
  CHECK(stored.summary.state == store::RunState::done);
  CHECK(stored.summary.prototype == "Marten");
  CHECK(stored.utc_offset_ns == kStartUtc);
  REQUIRE(stored.steps.size() == 2);
  for (const auto& step : stored.steps) {
    CAPTURE(step.label);
    CHECK(step.state == store::StepState::done);
    REQUIRE(step.average_end_ns);
    CHECK(*step.soak_begin_ns >= *step.begun_ns);
    CHECK(*step.settle_begin_ns - *step.soak_begin_ns >= kSecond);
    CHECK(*step.average_begin_ns >= *step.settled_ns);
    CHECK(*step.average_end_ns - *step.average_begin_ns >= 2 * kSecond);
    CHECK(*step.ended_ns >= *step.average_end_ns);
    for (const auto& channel : stored.channels)
      CHECK(usable_in_window(channel, step) >= 9);  // 2 s, one each 0.2 s
  }
  CHECK(stored.steps[0].settled_how == "slope");
  // The last step goes on to the rate criterion although a prediction is allowed.
  CHECK(stored.steps[1].settled_how == "rate");
  const auto settled_after_s =
      static_cast<double>(*stored.steps[1].settled_ns - kStartUtc - bench.load.last("SET 600")) * 1e-9;
  CHECK(settled_after_s > 14.9);
  CHECK(settled_after_s < 15.6);  // looked at four times a second, read five times

  const auto setting = std::find_if(stored.settings.begin(), stored.settings.end(),
                                    [](const auto& one) { return one.step == 1; });
  REQUIRE(setting != stored.settings.end());
  CHECK(setting->value == 600.0);
  REQUIRE(setting->read_back);
  CHECK(*setting->read_back == 600.0);
  // What the meter showed at 600 W is in the record, good and unchanged.
  const auto& power = stored.channels[1];
  CHECK(power.entry.name == "output power");
  CHECK(*std::max_element(power.value.begin(), power.value.end()) == Approx(600.0).epsilon(2e-5));
}

TEST_CASE("a prediction ends a step that is not the last, where the stair allows it") {
  RunBench bench;
  auto step = quick_step("a", 100);
  step.thermal = setup::ThermalSettle{"heatsink", 0.05, 5.0, 3, 0.0, true, 2.0, 5.0};
  step.settle_limit_s = 90;
  auto forbidden = step;
  forbidden.label = "b";
  forbidden.thermal->by_prediction = false;
  forbidden.set[0].value = 200;
  bench.world.heat = [&](double t_s) {
    const auto set_ns = std::max(bench.load.last("SET 100"), bench.load.last("SET 200"));
    const double from = bench.load.last("SET 200") < 0 ? 30.0 : 70.0;
    return from + 40.0 * (1.0 - std::exp(-(t_s - static_cast<double>(set_ns) * 1e-9) / 4.0));
  };
  const auto run = bench.start(fake_stair({step, forbidden, quick_step("c", 100)}));
  bench.run_to_end(300);
  const auto stored = bench.stored(run);
  CHECK(stored.steps[0].settled_how == "prediction");
  CHECK(stored.steps[1].settled_how == "rate");
  CHECK(stored.steps[2].settled_how == "no criterion");
}

TEST_CASE("a step that does not settle goes on, and says so") {
  RunBench bench;
  auto step = quick_step("drifting", 100);
  step.thermal = setup::ThermalSettle{"heatsink", 0.5, 2.0, 1, 0.0, false, 1.0, 0.0};
  step.settle_limit_s = 6;
  bench.world.heat = [](double t_s) { return 20.0 + t_s; };
  const auto run = bench.start(fake_stair({step}));
  bench.run_to(StepPhase::settle);
  bench.run_for(3);
  CHECK_FALSE(bench.now().waits_for.empty());
  REQUIRE(bench.now().remaining_s);
  CHECK(*bench.now().remaining_s <= 6.0);
  bench.run_to_end();
  const auto stored = bench.stored(run);
  CHECK(stored.summary.state == store::RunState::done);
  CHECK(stored.steps[0].settled_how == "not settled");
  CHECK(stored.steps[0].average_end_ns.has_value());
  CHECK(bench.has_event("not settled"));
}

TEST_CASE("a hand prompt waits for the person, with its cautions") {
  auto hookup = fake_hookup(false);
  hookup.ports.push_back({});
  hookup.ports.back().name = "input";
  hookup.ports.back().live = true;
  RunBench bench{hookup};
  auto step = quick_step("lamps", 120);
  step.prompt = "Switch on two lamps.";
  auto last = quick_step("after", 100);
  const auto run = bench.start(fake_stair({step, last}));
  bench.run_to(StepPhase::prompt);
  bench.run_for(30);
  const auto shown = bench.now();
  REQUIRE(shown.prompt);
  CHECK(shown.prompt->kind == PromptKind::hand);
  CHECK(shown.prompt->text == "Switch on two lamps.");
  std::string cautions;
  for (const auto& one : shown.prompt->cautions) cautions += one + "\n";
  CHECK_THAT(cautions, Catch::Contains("prove dead with a tester"));
  CHECK_THAT(cautions, Catch::Contains("never by a screen"));
  CHECK_THAT(cautions, Catch::Contains("Never unplug a DC lead under load"));
  CHECK_FALSE(bench.sequencer->answer(shown.prompt->id + 1, "test").ok());
  SECTION("answered") {
    REQUIRE(bench.sequencer->answer(shown.prompt->id, "test").ok());
    CHECK_FALSE(bench.sequencer->answer(shown.prompt->id, "test").ok());
    bench.run_to_end();
    const auto stored = bench.stored(run);
    CHECK(stored.steps[0].state == store::StepState::done);
    REQUIRE(stored.prompts.size() == 1);
    CHECK(stored.prompts[0].by == "test");
    CHECK(stored.prompts[0].answered_ns - stored.prompts[0].prompted_ns >= 29 * kSecond);
  }
  SECTION("refused: the step is skipped") {
    REQUIRE(bench.sequencer->refuse(shown.prompt->id, "no lamps here").ok());
    bench.run_to_end();
    const auto stored = bench.stored(run);
    CHECK(stored.steps[0].state == store::StepState::skipped);
    CHECK_THAT(stored.steps[0].reason, Catch::Contains("no lamps here"));
    CHECK(stored.steps[1].state == store::StepState::done);
  }
}

TEST_CASE("a set point that reads back as something else ends in the safe state") {
  RunBench bench;
  bench.world.source_echo = [] { return std::string{"370"}; };
  const auto run = bench.start(fake_stair({quick_step("a", 100)}));
  bench.run_to_end();
  CHECK(bench.now().phase == RunPhase::stopped);
  CHECK_THAT(bench.now().reason, Catch::Contains("cannot set source voltage"));
  CHECK(bench.source.count("OUTP ON") == 0);
  CHECK(bench.source.count("OUTP OFF") >= 1);
  CHECK(bench.off());
  const auto stored = bench.stored(run);
  CHECK(stored.summary.state == store::RunState::stopped);
  CHECK(bench.has_event("command_refused"));
}

TEST_CASE("an instrument that is not there stops the run before anything is switched on") {
  sequencer::SequencerOptions options;
  options.ready_limit_s = 3;
  RunBench bench{fake_hookup(false), options};
  bench.meter.vanish();
  bench.start(fake_stair({quick_step("a", 100)}));
  bench.run_to_end();
  CHECK(bench.now().phase == RunPhase::stopped);
  CHECK_THAT(bench.now().reason, Catch::Contains("not ready: meter"));
  CHECK(bench.source.count("OUTP ON") == 0);
}

TEST_CASE("stop in every phase ends in the safe state") {
  const auto phase =
      GENERATE(StepPhase::start, StepPhase::apply, StepPhase::prompt, StepPhase::soak, StepPhase::settle,
               StepPhase::average, StepPhase::typed, StepPhase::capture, StepPhase::hold);
  CAPTURE(name_of(phase));
  auto hookup = fake_hookup(phase == StepPhase::typed);
  hookup.captures.push_back({});
  hookup.captures.back().instrument = "scope";
  RunBench bench{hookup};
  auto step = fake_step("a", 100);
  if (phase == StepPhase::prompt) step.prompt = "Turn the knob.";
  step.thermal = setup::ThermalSettle{"heatsink", 0.5, 2.0, 1, 0.0, false, 1.0, 0.0};
  step.settle_limit_s = 5;
  step.capture = true;
  if (phase == StepPhase::apply) bench.load.late_s = 0.3;
  auto stair = fake_stair({step, step});
  auto guard = guard_on("heatsink");
  guard.above = 90;
  guard.action = setup::GuardAction::hold;
  stair.guards.push_back(guard);
  const auto run = bench.start(stair);
  if (phase == StepPhase::apply) {
    bench.run_until([&] { return bench.now().step_phase == StepPhase::start; });
    bench.load.fault = FakeInstrument::Fault::late;
  }
  if (phase == StepPhase::hold) {
    bench.run_to(StepPhase::soak);
    bench.world.heat_c = 95;
  }
  bench.run_until([&] { return bench.now().step_phase == phase; });
  bench.load.fault = FakeInstrument::Fault::none;
  REQUIRE(bench.sequencer->stop("enough").ok());
  CHECK_FALSE(bench.sequencer->stop("again").ok());
  const auto asked_ns = bench.clock->now_ns();
  bench.run_until([&] { return bench.off(); }, 3.0);
  bench.run_to_end();
  CHECK(bench.off());
  CHECK(bench.now().phase == RunPhase::stopped);
  CHECK(bench.now().warnings.empty());
  CHECK_FALSE(bench.now().prompt);
  CHECK(bench.load.last("INP OFF") >= asked_ns);
  CHECK(bench.load.last("INP ON") <= bench.load.last("INP OFF"));
  CHECK(bench.source.last("OUTP ON") <= bench.source.last("OUTP OFF"));
  const auto stored = bench.stored(run);
  CHECK(stored.summary.state == store::RunState::stopped);
  CHECK(stored.end_reason == "enough");
  for (const auto& one : stored.steps) {
    CHECK((one.state == store::StepState::stopped || one.state == store::StepState::waiting));
    if (phase != StepPhase::capture) CHECK_FALSE(one.average_end_ns.has_value());
  }
}

TEST_CASE("skip leaves a step, the others go on") {
  RunBench bench;
  const auto run = bench.start(fake_stair({quick_step("a", 100), quick_step("b", 200)}));
  CHECK_FALSE(bench.sequencer->skip("too early").ok());
  bench.run_to(StepPhase::soak, 0);
  REQUIRE(bench.sequencer->skip("not wanted").ok());
  CHECK_FALSE(bench.sequencer->resume().ok());
  bench.run_to_end();
  const auto stored = bench.stored(run);
  CHECK(stored.summary.state == store::RunState::done);
  CHECK(stored.steps[0].state == store::StepState::skipped);
  CHECK(stored.steps[0].reason == "not wanted");
  CHECK(stored.steps[1].state == store::StepState::done);
}

TEST_CASE("one run at a time, and only a stair that fits") {
  RunBench bench;
  CHECK_FALSE(bench.sequencer->start(fake_stair({})).ok());
  auto wrong = fake_stair({quick_step("a", 100)});
  wrong.steps[0].set[0].control = "nobody";
  CHECK_FALSE(bench.sequencer->start(wrong).ok());
  CHECK(bench.now().phase == RunPhase::idle);
  bench.start(fake_stair({quick_step("a", 100)}));
  CHECK_FALSE(bench.sequencer->start(fake_stair({quick_step("a", 100)})).ok());
  bench.run_to_end();
  CHECK(bench.start(fake_stair({quick_step("a", 100)})) == 2);
  bench.run_to_end();
}

TEST_CASE("captures: taken in with their step; a missing one is an event, no failure") {
  auto hookup = fake_hookup(false);
  hookup.captures.push_back({});
  hookup.captures.back().instrument = "scope";
  std::vector<std::string> asked;
  recorder::Bench* scope = nullptr;
  sequencer::SequencerOptions options;
  options.capture_limit_s = 3;
  options.request_capture = [&](const std::string& label) {
    asked.push_back(label);
    if (label == "a") scope->take_capture("scope", "a.csv", "t,v\n0,1\n1e-3,2\n2e-3,3\n");
  };
  RunBench bench{hookup, options};
  scope = bench.bench.get();
  auto a = quick_step("a", 100);
  auto b = quick_step("b", 200);
  a.capture = b.capture = true;
  const auto run = bench.start(fake_stair({a, b}));
  bench.run_to_end();
  CHECK(asked == std::vector<std::string>{"a", "b"});
  const auto stored = bench.stored(run);
  CHECK(stored.summary.state == store::RunState::done);
  REQUIRE(stored.captures.size() == 1);
  CHECK(stored.captures[0].step == 0);
  CHECK(stored.captures[0].bytes == "t,v\n0,1\n1e-3,2\n2e-3,3\n");
  CHECK(bench.has_event("capture missing"));
  CHECK(stored.steps[1].state == store::StepState::done);
}

TEST_CASE("work off the I/O thread: settling and captures come back to it") {
  recorder::BenchOptions pool;
  std::size_t jobs = 0;
  // Joined at once: virtual time must not run away from the thread.
  pool.background = [&jobs](std::function<void()> job) {
    ++jobs;
    std::thread{std::move(job)}.join();
  };
  auto hookup = fake_hookup(false);
  hookup.captures.push_back({});
  hookup.captures.back().instrument = "scope";
  recorder::Bench* scope = nullptr;
  sequencer::SequencerOptions options;
  options.request_capture = [&scope](const std::string&) {
    scope->take_capture("scope", "a.csv", "t,v\n0,1\n1e-3,2\n2e-3,3\n");
  };
  RunBench bench{hookup, options, pool};
  scope = bench.bench.get();
  auto step = quick_step("a", 100);
  step.electrical = setup::ElectricalSettle{"output power", 5.0, 2.0};
  step.settle_limit_s = 30;
  step.capture = true;
  const auto run = bench.start(fake_stair({step}));
  bench.run_to_end();
  const auto stored = bench.stored(run);
  CHECK(stored.steps[0].settled_how == "slope");
  CHECK(stored.captures.size() == 1);
  CHECK(jobs >= 2);
}

TEST_CASE("what breaks in the background is told and ends nothing") {
  RunBench bench;
  bool done = false;
  bench.bench->in_background([] { throw std::runtime_error{"the pool is on fire"}; },
                             [&done] { done = true; });
  CHECK(done);
  CHECK(bench.has_event("broken"));
}

TEST_CASE("cool down and discharge are waited for, with the caution to prove dead") {
  RunBench bench;
  auto stair = fake_stair({quick_step("a", 100)});
  stair.end = {2.0, 3.0};
  bench.start(stair);
  bench.run_until([&] { return bench.now().waits_for.starts_with("discharges"); });
  CHECK(bench.off());
  CHECK_THAT(bench.now().waits_for, Catch::Contains("prove dead with a tester"));
  CHECK_THAT(bench.now().waits_for, Catch::Contains("never by a screen"));
  REQUIRE(bench.now().remaining_s);
  const auto off_ns = bench.source.last("OUTP OFF");
  bench.run_to_end();
  CHECK(bench.clock->now_ns() - off_ns >= 5 * kSecond);
  CHECK(bench.now().phase == RunPhase::done);
}

TEST_CASE("changes are told, and the counter grows") {
  RunBench bench;
  int told = 0;
  bench.sequencer->on_change([&] { ++told; });
  const auto before = bench.sequencer->change();
  bench.start(fake_stair({quick_step("a", 100)}));
  bench.run_to_end();
  CHECK(told > 5);
  CHECK(bench.sequencer->change() > before);
}

}  // namespace
}  // namespace loadstair::testing
