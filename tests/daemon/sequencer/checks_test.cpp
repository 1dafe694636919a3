// Checks of the bench as steps: what is on, in which order it is switched, and when a person may touch the
// wiring. What is expected follows from daemon/setup/stair.h and the cautions of README.md ("isolate, prove
// dead ..."); the responders know nothing of the sequencer.
#include <catch2/catch.hpp>

#include "daemon/sequencer/run_bench.h"

namespace loadstair::testing {
namespace {

using sequencer::PromptKind;
using sequencer::RunPhase;
using sequencer::StepPhase;
using setup::StepKind;

setup::Step check_step(const std::string& label, StepKind kind, const std::string& rewire = {}) {
  auto step = quick_step(label, 0);
  step.kind = kind;
  step.set.clear();
  step.rewire = rewire;
  return step;
}

/// What was commanded on both controls, in order; a safe command that was repeated counts once.
std::vector<std::string> commands(const RunBench& bench) {
  std::vector<std::pair<std::int64_t, std::string>> all;
  const auto gather = [&all](const FakeInstrument& from, const std::string& name) {
    for (const auto& one : from.heard) {
      if (one.line.find('?') == std::string::npos) all.emplace_back(one.t_ns, name + " " + one.line);
    }
  };
  gather(bench.source, "source");
  gather(bench.load, "load");
  std::stable_sort(all.begin(), all.end(), [](const auto& a, const auto& b) { return a.first < b.first; });
  std::vector<std::string> lines;
  for (const auto& [t_ns, line] : all) {
    if (line.ends_with(" OFF") && !lines.empty() && lines.back() == line) continue;
    lines.push_back(line);
  }
  return lines;
}

/// Runs to the end; every hand prompt is answered at once, and the bench must be dead then if it is about the
/// wiring. Returns the prompts' texts.
std::vector<std::string> run_answering(RunBench& bench) {
  std::vector<std::string> texts;
  std::int64_t answered = 0;
  bench.run_until(
      [&] {
        const auto now = bench.now();
        if (now.prompt && now.prompt->id > answered && now.prompt->kind == PromptKind::hand) {
          answered = now.prompt->id;
          texts.push_back(now.prompt->text);
          CHECK(bench.off());
          REQUIRE(bench.sequencer->answer(answered, "test").ok());
        }
        return !bench.sequencer->busy();
      },
      200);
  return texts;
}

TEST_CASE("each kind of step has on what it needs, switched in the safe order") {
  auto hookup = fake_hookup(false);
  hookup.channels[1] =
      linked("output power", "power", setup::Quantity::voltage, "V");  // one quantity to be tied
  RunBench bench{hookup};
  auto tie = check_step("tie", StepKind::tie, "Both voltmeters in parallel.");
  tie.on = {"source"};
  tie.set = {{"source", "voltage", 100}};
  auto stair = fake_stair({check_step("zero", StepKind::zero, "Short the inputs."), tie, quick_step("a", 100),
                           check_step("no load", StepKind::no_load), check_step("standby", StepKind::standby),
                           quick_step("b", 200)});
  stair.steps[2].rewire = "As the hook-up file says.";
  stair.ties = {{"voltmeters", {"output voltage", "output power"}}};
  stair.zero_channels = {"output voltage"};
  const auto run = bench.start(stair);
  CHECK(run_answering(bench) == std::vector<std::string>{"Short the inputs.", "Both voltmeters in parallel.",
                                                         "As the hook-up file says."});
  CHECK(bench.now().phase == RunPhase::done);
  CHECK(bench.now().warnings.empty());
  CHECK(commands(bench) ==
        std::vector<std::string>{
            "load INP OFF",   "source OUTP OFF",  // dead before the first change of the wiring
            "load INP OFF",   "source OUTP OFF",  // and before the second, whatever is believed to be on
            "source SET 385", "source SET 100",  "source OUTP ON",
            "source SET 100",                     // tie: at start, then its own
            "load INP OFF",   "source OUTP OFF",  // before the third
            "source SET 385", "load SET 100",    "source OUTP ON", "load INP ON", "load SET 100",  // level a
            "load INP OFF",                                                                        // no load
            "load SET 200",   "load INP ON",     "load SET 200",  // standby changes nothing; level b
            "load INP OFF",   "source OUTP OFF"});                // the end
  const auto stored = bench.stored(run);
  REQUIRE(stored.steps.size() == 6);
  for (const auto& step : stored.steps) {
    CAPTURE(step.label);
    CHECK(step.state == store::StepState::done);
    CHECK(step.average_end_ns.has_value());
  }
  CHECK(stored.prompts.size() == 3);
}

TEST_CASE("the wiring is touched only after off is read back and the discharge has passed") {
  RunBench bench;
  auto stair = fake_stair({quick_step("a", 100), quick_step("b", 200)});
  stair.steps[1].rewire = "Move the meter.";
  stair.end.discharge_s = 7.0;
  bench.start(stair);
  SECTION("confirmed: then the prompt, with what keeps a person alive") {
    bench.run_to(StepPhase::safe_state, 1);
    CHECK(bench.off());
    CHECK_FALSE(bench.now().prompt);
    REQUIRE(bench.now().remaining_s);
    CHECK(*bench.now().remaining_s > 6.5);
    bench.run_to(StepPhase::prompt, 1);
    const auto shown = bench.now();
    REQUIRE(shown.prompt);
    CHECK(shown.prompt->since_ns - bench.source.last("OUTP OFF") >= 7 * kSecond);
    std::string cautions;
    for (const auto& one : shown.prompt->cautions) cautions += one + "\n";
    CHECK_THAT(cautions, Catch::Contains("The wiring is changed only dead"));
    CHECK_THAT(cautions, Catch::Contains("prove dead with a tester"));
    bench.run_for(100);  // nobody hurries a person
    CHECK(bench.off());
    CHECK(bench.load.last("SET 200") < 0);
    REQUIRE(bench.sequencer->answer(shown.prompt->id, "test").ok());
    bench.run_to_end();
    CHECK(bench.now().phase == RunPhase::done);
    CHECK(bench.load.last("SET 200") > 0);
  }
  SECTION("a load that goes off but does not say so: no prompt, the run ends loudly") {
    bench.run_to(StepPhase::average, 0);
    bench.load.fault = FakeInstrument::Fault::silent;
    bench.run_to_end();
    CHECK(bench.now().phase == RunPhase::stopped);
    CHECK_THAT(bench.now().reason, Catch::Contains("cannot switch off load"));
    CHECK_FALSE(bench.now().warnings.empty());
    CHECK(bench.has_event("not switched off"));
    CHECK_FALSE(bench.world.source_on);
  }
  SECTION("a load that stays on, and says so") {
    bench.run_to(StepPhase::average, 0);
    bench.load.on_command = [](const std::string&) {};
    std::vector<std::string> texts = run_answering(bench);
    CHECK(texts.empty());
    CHECK(bench.now().phase == RunPhase::stopped);
    CHECK_FALSE(bench.now().warnings.empty());
    CHECK_FALSE(bench.world.source_on);
  }
}

TEST_CASE("a stop while the wiring is changed leaves the bench dead") {
  RunBench bench;
  auto stair = fake_stair({quick_step("a", 100), quick_step("b", 200)});
  stair.steps[1].rewire = "Move the meter.";
  stair.end.discharge_s = 5.0;
  const auto run = bench.start(stair);
  const auto phase = GENERATE(StepPhase::safe_state, StepPhase::prompt);
  bench.run_to(phase, 1);
  REQUIRE(bench.sequencer->stop("enough").ok());
  const auto on_before = bench.source.count("OUTP ON");
  bench.run_to_end();
  CHECK(bench.now().phase == RunPhase::stopped);
  CHECK(bench.now().warnings.empty());
  CHECK_FALSE(bench.now().prompt);
  CHECK(bench.off());
  CHECK(bench.source.count("OUTP ON") == on_before);
  CHECK(bench.load.last("SET 200") < 0);
  const auto stored = bench.stored(run);
  CHECK(stored.steps[1].state == store::StepState::stopped);
  CHECK(stored.prompts.empty());
}

TEST_CASE("a change of the wiring that nobody confirmed is asked again before the next power") {
  RunBench bench;
  auto stair = fake_stair(
      {check_step("zero", StepKind::zero, "Short the inputs."), quick_step("a", 100), quick_step("b", 200)});
  stair.steps[1].rewire = "Take the shorts away.";
  stair.zero_channels = {"output voltage"};
  const auto run = bench.start(stair);
  bench.run_to(StepPhase::prompt, 0);
  REQUIRE(bench.sequencer->answer(bench.now().prompt->id, "test").ok());
  bench.run_to(StepPhase::prompt, 1);
  const bool refused = GENERATE(true, false);
  if (refused) {
    REQUIRE(bench.sequencer->refuse(bench.now().prompt->id, "no time").ok());
  } else {
    REQUIRE(bench.sequencer->skip("no time").ok());
  }
  bench.run_to(StepPhase::prompt, 2);
  CHECK(bench.source.count("OUTP ON") == 0);
  CHECK(bench.now().prompt->text == "Take the shorts away.");
  REQUIRE(bench.sequencer->answer(bench.now().prompt->id, "test").ok());
  bench.run_to_end();
  const auto stored = bench.stored(run);
  CHECK(stored.summary.state == store::RunState::done);
  CHECK(stored.steps[1].state == store::StepState::skipped);
  CHECK(stored.steps[2].state == store::StepState::done);
}

TEST_CASE("guards on a dead bench: no lower limit, everything else") {
  RunBench bench;
  auto zero = check_step("zero", StepKind::zero);
  zero.average_s = 4.0;
  auto standby = check_step("standby", StepKind::standby);
  standby.average_s = 4.0;
  auto no_load = check_step("no load", StepKind::no_load);
  no_load.average_s = 4.0;
  auto stair = fake_stair({zero, standby, no_load, quick_step("a", 100)});
  stair.zero_channels = {"output voltage"};
  auto sags = guard_on("output voltage");
  sags.below = 195;
  sags.missing_after_s = 2.0;
  auto hot = guard_on("heatsink");
  hot.above = 90;
  stair.guards = {sags, hot};
  bench.world.voltage = 0.0;  // until the converter runs
  bench.start(stair);
  SECTION("nothing trips where nothing is wrong, and the limit is not shown") {
    bench.run_to(StepPhase::average, 0);
    bench.run_for(2);
    CHECK_FALSE(bench.now().guards[0].below);
    CHECK(bench.now().guards[0].state == "watching");
    bench.run_to(StepPhase::average, 1);
    bench.run_for(3.8);
    bench.world.voltage.reset();
    bench.run_to(StepPhase::average, 2);
    CHECK(bench.now().guards[0].below == 195.0);
    bench.run_to_end();
    CHECK(bench.now().phase == RunPhase::done);
    CHECK(bench.now().trips.empty());
  }
  SECTION("nor before the hand that switches the converter on") {
    bench.run_to(StepPhase::average, 1);
    REQUIRE(bench.sequencer->stop("another stair").ok());
    bench.run_to_end();
    stair.steps[2].prompt = "Switch the converter on.";
    bench.start(stair);
    bench.run_to(StepPhase::prompt, 2);
    bench.run_for(20);
    CHECK(bench.now().phase == RunPhase::running);
    CHECK(bench.now().trips.empty());
    bench.world.voltage.reset();
    bench.run_for(0.3);
    REQUIRE(bench.sequencer->answer(bench.now().prompt->id, "test").ok());
    bench.run_to(StepPhase::average, 2);
    CHECK(bench.now().guards[0].below == 195.0);
    bench.world.voltage = 100.0;
    bench.run_to_end();
    CHECK_THAT(bench.now().reason, Catch::Contains("below 195 V"));
  }
  SECTION("an upper limit at a zero") {
    bench.run_to(StepPhase::average, 0);
    bench.world.heat_c = 95;
    bench.run_to_end();
    CHECK(bench.now().phase == RunPhase::stopped);
    CHECK_THAT(bench.now().reason, Catch::Contains("heatsink"));
  }
  SECTION("a missing reading at a zero") {
    bench.run_to(StepPhase::average, 0);
    bench.meter.fault = FakeInstrument::Fault::silent;
    bench.run_to_end();
    CHECK(bench.now().phase == RunPhase::stopped);
    CHECK_THAT(bench.now().reason, Catch::Contains("no usable reading"));
  }
  SECTION("without load the output is alive: its lower limit counts") {
    bench.run_to_end();
    CHECK(bench.now().phase == RunPhase::stopped);
    CHECK(bench.now().label == "no load");
    CHECK_THAT(bench.now().reason, Catch::Contains("below 195 V"));
  }
}

TEST_CASE("typed rounds ask at a zero and a tie for the check's channels only, whatever they read") {
  auto hookup = fake_hookup(true);
  hookup.channels[1] = linked("output power", "power", setup::Quantity::current, "A");
  RunBench bench{hookup};
  auto tie = check_step("tie", StepKind::tie);
  tie.on = {"source"};
  auto stair =
      fake_stair({check_step("zero", StepKind::zero), tie, check_step("standby", StepKind::standby)});
  stair.zero_channels = {"input voltage"};
  stair.ties = {{"ammeters", {"output power", "input current"}}};
  bench.start(stair);
  std::vector<std::string> asked;
  std::int64_t answered = 0;
  bench.run_until(
      [&] {
        const auto now = bench.now();
        if (now.prompt && now.prompt->id > answered) {
          answered = now.prompt->id;
          asked.push_back(now.label + ": " + now.prompt->channel);
          CHECK(now.prompt->low.has_value() == (now.label == "standby"));
          // Its plausible values are 300 to 420 V and 0 to 3 A; at the zero and the tie they say nothing.
          const auto taken = bench.sequencer->enter_typed(
              answered,
              {.value = now.label == "standby" && now.prompt->channel == "input voltage" ? "385" : "-0.1"});
          const bool doubted = now.label == "standby" && now.prompt->channel == "input current";
          CHECK(taken.ok() == !doubted);
          if (doubted) REQUIRE(bench.sequencer->refuse(answered, "not wanted").ok());
        }
        return !bench.sequencer->busy();
      },
      100);
  CHECK(asked == std::vector<std::string>{"zero: input voltage", "zero: input voltage", "tie: input current",
                                          "tie: input current", "standby: input voltage",
                                          "standby: input current", "standby: input current",
                                          "standby: input voltage"});
  CHECK(bench.now().phase == RunPhase::done);
}

TEST_CASE("what nobody can confirm to be off is refused before anything is on") {
  auto hookup = fake_hookup(false);
  hookup.instruments[2].profile.safe = instrument::ProfileSafe{{"INP OFF"}, "", ""};
  RunBench bench{hookup};
  auto rewired = fake_stair({quick_step("a", 100), quick_step("b", 100)});
  rewired.steps[1].rewire = "Move the meter.";
  for (const auto& stair :
       {rewired, fake_stair({quick_step("a", 100), check_step("no load", StepKind::no_load)})}) {
    const auto started = bench.sequencer->start(stair);
    REQUIRE_FALSE(started.ok());
    CHECK_THAT(started.refusal().text(), Catch::Contains("load"));
  }
  // Levels alone need nothing switched off.
  bench.start(fake_stair({quick_step("a", 100)}));
  bench.run_to_end();
  CHECK(bench.now().phase == RunPhase::done);
}

TEST_CASE("a skipped zero leaves the others alone") {
  RunBench bench;
  auto stair = fake_stair({check_step("zero", StepKind::zero), quick_step("a", 100)});
  stair.zero_channels = {"output voltage"};
  const auto run = bench.start(stair);
  bench.run_to(StepPhase::soak, 0);
  REQUIRE(bench.sequencer->skip("meters are cold").ok());
  bench.run_to_end();
  const auto stored = bench.stored(run);
  CHECK(stored.steps[0].state == store::StepState::skipped);
  CHECK(stored.steps[1].state == store::StepState::done);
  CHECK(bench.off());
}

TEST_CASE("a hold in mid-bring-up does not ask for the wiring twice") {
  RunBench bench;
  auto stair = fake_stair({check_step("zero", StepKind::zero, "Short the inputs."), quick_step("a", 100)});
  stair.zero_channels = {"output voltage"};
  auto hot = guard_on("heatsink");
  hot.above = 90;
  hot.action = setup::GuardAction::hold;
  stair.guards = {hot};
  bench.start(stair);
  bench.run_to(StepPhase::prompt, 0);
  REQUIRE(bench.sequencer->answer(bench.now().prompt->id, "test").ok());
  bench.run_to(StepPhase::soak, 0);
  bench.world.heat_c = 95;
  bench.run_until([&] { return bench.now().phase == RunPhase::holding; });
  bench.world.heat_c = 40;
  bench.run_for(1);
  REQUIRE(bench.sequencer->resume().ok());
  CHECK(run_answering(bench).empty());
  CHECK(bench.now().phase == RunPhase::done);
}

TEST_CASE("an instrument that is away while its safe state is owed is looked for often") {
  RunBench bench;
  bench.start(fake_stair({quick_step("a", 100)}));
  bench.run_to(StepPhase::average);
  bench.load.vanish();
  bench.run_for(0.1);
  REQUIRE(bench.sequencer->stop("enough").ok());
  bench.run_to_end();
  // Retries grow to 5 s where nothing is owed; the moments lie all over such a pause.
  bench.run_for(GENERATE(20.0, 21.1, 22.3, 23.2, 24.4));
  CHECK(bench.world.load_on);
  bench.load.come_back();
  bench.run_until([&] { return !bench.world.load_on; }, 2.0);
}

}  // namespace
}  // namespace loadstair::testing
