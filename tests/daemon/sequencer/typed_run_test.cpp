// Typed channels: two rounds, the second in reverse order; implausible values; corrections.
#include <catch2/catch.hpp>

#include "daemon/sequencer/run_bench.h"

namespace loadstair::testing {
namespace {

using sequencer::PromptKind;
using sequencer::RunPhase;
using sequencer::StepPhase;

setup::Hookup only_typed() {
  auto hookup = fake_hookup(true);
  hookup.instruments.clear();
  hookup.controls.clear();
  hookup.channels.erase(hookup.channels.begin(), hookup.channels.begin() + 3);
  hookup.channels.push_back(typed("output power", setup::Quantity::power, "W", 0, 700));
  return hookup;
}

setup::Step by_hand(const std::string& label, const std::string& what) {
  auto step = quick_step(label, 100);
  step.set.clear();
  step.prompt = what;
  return step;
}

TEST_CASE("a whole stair with typed channels only") {
  RunBench bench{only_typed()};
  const auto run = bench.start(fake_stair({by_hand("a", "One lamp."), by_hand("b", "Two lamps.")}));
  std::vector<std::string> asked;
  const std::map<std::string, std::string> shows = {
      {"input voltage", "385.2"}, {"input current", "0.271"}, {"output power", "99.4 W"}};
  std::int64_t answered = 0;
  bench.run_until(
      [&] {
        const auto now = bench.now();
        if (now.prompt && now.prompt->id > answered &&
            bench.clock->now_ns() - now.prompt->since_ns >= 2 * kSecond) {
          answered = now.prompt->id;
          if (now.prompt->kind == PromptKind::hand) {
            REQUIRE(bench.sequencer->answer(answered, "test").ok());
          } else {
            asked.push_back(now.label + " " + now.prompt->channel + " " +
                            base::print_integer(now.prompt->round));
            REQUIRE(bench.sequencer
                        ->enter_typed(answered, {.value = shows.at(now.prompt->channel), .range = "600"})
                        .ok());
          }
        }
        return !bench.sequencer->busy();
      },
      200);
  CHECK(bench.now().phase == RunPhase::done);
  CHECK(asked == std::vector<std::string>{"a input voltage 1", "a input current 1", "a output power 1",
                                          "a output power 2", "a input current 2", "a input voltage 2",
                                          "b input voltage 1", "b input current 1", "b output power 1",
                                          "b output power 2", "b input current 2", "b input voltage 2"});
  const auto stored = bench.stored(run);
  CHECK(stored.summary.state == store::RunState::done);
  REQUIRE(stored.typed.size() == 12);
  for (const auto& one : stored.typed) {
    const auto& step = stored.steps[static_cast<std::size_t>(one.step)];
    CHECK(one.flags == instrument::kTyped);
    CHECK(one.entered_ns - one.prompted_ns >= 2 * kSecond);
    CHECK(one.entered_ns - one.prompted_ns < 3 * kSecond);
    CHECK(one.prompted_ns >= *step.average_begin_ns);
    CHECK(one.entered_ns <= *step.average_end_ns);
    CHECK(one.range == 600.0);
  }
  CHECK(stored.typed[0].value == 385.2);
  CHECK(stored.typed[0].last_digit == Approx(0.1));
  CHECK(stored.typed[2].unit == "W");
  // Nothing here can be switched off by the program: it says so.
  REQUIRE(bench.now().warnings.size() == 1);
  CHECK_THAT(bench.now().warnings[0], Catch::Contains("Switch it off by hand"));
  CHECK_THAT(bench.now().warnings[0], Catch::Contains("prove dead with a tester"));
}

TEST_CASE("the second round ends with the window, linked readings go on meanwhile") {
  RunBench bench{fake_hookup(true)};
  auto step = quick_step("a", 100);
  step.average_s = 20;
  const auto run = bench.start(fake_stair({step}));
  std::int64_t answered = 0;
  bench.run_until(
      [&] {
        const auto now = bench.now();
        if (now.prompt && now.prompt->id > answered &&
            bench.clock->now_ns() - now.prompt->since_ns >= 2 * kSecond) {
          answered = now.prompt->id;
          const bool voltage = now.prompt->channel == "input voltage";
          REQUIRE(bench.sequencer->enter_typed(answered, {.value = voltage ? "385.2" : "0.27"}).ok());
        }
        return !bench.sequencer->busy();
      },
      100);
  const auto stored = bench.stored(run);
  REQUIRE(stored.typed.size() == 4);
  const auto& window = stored.steps[0];
  CHECK(*window.average_end_ns - *window.average_begin_ns >= 20 * kSecond);
  CHECK(*window.average_end_ns - *window.average_begin_ns < 21 * kSecond);
  // Each channel's two instants lie around the window's middle.
  for (const std::int32_t channel : {3, 4}) {
    double sum_s = 0.0;
    for (const auto& one : stored.typed) {
      if (one.channel == channel) {
        sum_s +=
            static_cast<double>((one.prompted_ns + one.entered_ns) / 2 - *window.average_begin_ns) * 1e-9;
      }
    }
    CHECK(sum_s / 2.0 == Approx(10.0).margin(0.2));
  }
  std::size_t inside = 0;
  for (const auto t : stored.channels[1].t_ns) {
    if (t >= *window.average_begin_ns && t <= *window.average_end_ns) ++inside;
  }
  CHECK(inside >= 99);  // 20 s, one each 0.2 s
}

TEST_CASE("an implausible value needs a second look; a correction is kept beside the old one") {
  RunBench bench{only_typed()};
  const auto run = bench.start(fake_stair({by_hand("a", "")}));
  bench.run_until([&] { return bench.now().step_phase == StepPhase::typed; });
  const auto id = bench.now().prompt->id;
  auto& sequencer = *bench.sequencer;
  CHECK(bench.now().prompt->channel == "input voltage");
  CHECK(bench.now().prompt->low == 300.0);
  CHECK_FALSE(sequencer.enter_typed(id, {.value = "lots"}).ok());
  CHECK(bench.now().prompt->kind == PromptKind::typed);

  // Confirmed before it was asked is no confirmation.
  const auto doubted = sequencer.enter_typed(id, {.value = "38.52", .confirmed = true});
  REQUIRE_FALSE(doubted.ok());
  CHECK_THAT(doubted.refusal().reason, Catch::Contains("below 300 V"));
  REQUIRE(bench.now().prompt);
  CHECK(bench.now().prompt->id == id);
  CHECK(bench.now().prompt->kind == PromptKind::confirm);
  CHECK(bench.now().prompt->value_text == "38.52");
  // Another implausible one is another question.
  CHECK_FALSE(sequencer.enter_typed(id, {.value = "3.852", .confirmed = true}).ok());
  SECTION("confirmed") {
    REQUIRE(sequencer.enter_typed(id, {.value = "3.852", .confirmed = true}).ok());
    const auto stored = bench.stored(run);
    REQUIRE(stored.typed.size() == 1);
    CHECK(stored.typed[0].value == 3.852);
    CHECK(stored.typed[0].flags == (instrument::kTyped | instrument::kImplausible));
  }
  SECTION("corrected at the prompt") {
    REQUIRE(sequencer.enter_typed(id, {.value = "385.2"}).ok());
    const auto stored = bench.stored(run);
    REQUIRE(stored.typed.size() == 1);
    CHECK(stored.typed[0].flags == instrument::kTyped);
  }
  SECTION("corrected later, by the prompt's number") {
    bench.run_for(3);
    REQUIRE(sequencer.enter_typed(id, {.value = "358.2"}).ok());
    bench.run_for(2);
    REQUIRE(bench.now().typed.size() == 1);
    CHECK(bench.now().prompt->channel == "input current");
    REQUIRE(sequencer.enter_typed(id, {.value = "385.2"}).ok());
    CHECK(bench.now().prompt->channel == "input current");  // the open prompt stays
    const auto stored = bench.stored(run);
    REQUIRE(stored.typed.size() == 2);
    CHECK(stored.typed[0].value == 358.2);
    CHECK((stored.typed[0].flags & instrument::kSuperseded) != 0U);
    CHECK(stored.typed[1].value == 385.2);
    CHECK((stored.typed[1].flags & instrument::kSuperseded) == 0U);
    // The meter was read when it was asked for, not when the slip was found.
    CHECK(stored.typed[1].prompted_ns == stored.typed[0].prompted_ns);
    CHECK(stored.typed[1].entered_ns == stored.typed[0].entered_ns);
    const auto shown = bench.now().typed;
    REQUIRE(shown.size() == 2);
    CHECK(shown[0].superseded);
    CHECK_FALSE(shown[1].superseded);
    CHECK(bench.has_event("corrected"));
  }
}

TEST_CASE("a typed prompt that is refused leaves a gap, and the run goes on") {
  RunBench bench{only_typed()};
  const auto run = bench.start(fake_stair({by_hand("a", "")}));
  std::int64_t answered = 0;
  bench.run_until(
      [&] {
        const auto now = bench.now();
        if (now.prompt && now.prompt->id > answered) {
          answered = now.prompt->id;
          if (now.prompt->channel == "input current") {
            REQUIRE(bench.sequencer->refuse(answered, "its battery is empty").ok());
          } else {
            const std::string value = now.prompt->channel == "input voltage" ? "385" : "99";
            REQUIRE(bench.sequencer->enter_typed(answered, {.value = value}).ok());
          }
        }
        return !bench.sequencer->busy();
      },
      60);
  const auto stored = bench.stored(run);
  CHECK(stored.summary.state == store::RunState::done);
  CHECK(stored.typed.size() == 4);
  CHECK(bench.has_event("not typed"));
}

TEST_CASE("a typed value reaches the channel's window and the page") {
  RunBench bench{only_typed()};
  bench.start(fake_stair({by_hand("a", "")}));
  bench.run_until([&] { return bench.now().prompt.has_value(); });
  bench.run_for(1.0);
  REQUIRE(bench.sequencer->enter_typed(bench.now().prompt->id, {.value = "385200 mV"}).ok());
  const auto channels = bench.bench->channels();
  REQUIRE(channels[0].value);
  CHECK(*channels[0].value == Approx(385.2));
  CHECK(channels[0].words == std::vector<std::string>{"typed"});
  CHECK(*channels[0].half_width_s == Approx(0.5).margin(0.03));
}

}  // namespace
}  // namespace loadstair::testing
