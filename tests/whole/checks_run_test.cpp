// The sample stairs with their checks of the bench, whole and in virtual time: what the evaluation finds
// against what was drawn for the rehearsed meters and what was true of the simulated plant.
#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>

#include "drivers/rehearsal/simulator.h"
#include "whole/virtual_bench.h"

namespace loadstair::whole {
namespace {

/// The error that was drawn for a channel's meter, at a value that its terminals see.
rehearsal::DrawnError drawn(const setup::Hookup& hookup, std::uint64_t seed, const std::string& instrument,
                            const std::string& function, std::size_t range, double value) {
  command::RehearsalChoice choice;
  choice.seed = seed;
  const auto description = command::describe_rehearsal(hookup, choice);
  REQUIRE(description.ok());
  for (const auto& one : description->instruments) {
    if (one.name != instrument) continue;
    rehearsal::MeterDescription meter_description = one.meter;
    meter_description.name = one.name;
    const rehearsal::Meter meter{meter_description, seed, 1};
    return meter.error(meter.find(function).value(), range, value);
  }
  FAIL("no instrument " << instrument);
  return {};
}

const evaluation::BenchCheckResult& check_of(const evaluation::RunResult& result, const std::string& kind,
                                             const std::string& channel) {
  const auto found =
      std::find_if(result.bench_checks.begin(), result.bench_checks.end(),
                   [&](const auto& check) { return check.kind == kind && check.channel == channel; });
  REQUIRE(found != result.bench_checks.end());
  return *found;
}

bool near(const evaluation::Quantity& found, double truth) {
  // Twice the interval is missed by a bench inside its specification only if something is wrong.
  return found.known && std::abs(found.value - truth) < found.high - found.low;
}

std::vector<std::string> done_by_hand(const VirtualRun& run) {
  std::vector<std::string> actions;
  for (const auto& entry : run.log) {
    if (entry.kind == "hand") actions.push_back(entry.query);
  }
  return actions;
}

TEST_CASE("the Marten's stair with zeros, idle powers and a closure") {
  const auto hookup = sample_hookup();
  int closures_held = 0;
  for (std::uint64_t seed = 1; seed <= 5; ++seed) {
    CAPTURE(seed);
    VirtualChoice choice;
    choice.seed = seed;
    const auto run = run_virtually(hookup, sample_stair(), choice);
    CHECK(run.last.phase == sequencer::RunPhase::done);
    CHECK(run.last.warnings.empty());
    CHECK(run.last.trips.empty());
    CHECK(run.source_off);
    CHECK(run.load_off);
    const std::string shorted = "short input voltage, input current";
    CHECK(done_by_hand(run) == std::vector<std::string>{shorted, "restore", "converter 0", "converter 1",
                                                        "lamps 2", "lamps 0", shorted});
    REQUIRE(run.result.steps.size() == 14);
    for (std::size_t i = 0; i < run.result.steps.size(); ++i) {
      const auto& step = run.result.steps[i];
      CAPTURE(step.label);
      CHECK(step.state == "done");
      const bool level = step.kind == "level" || step.kind == "closure";
      CHECK(step.efficiency.known == level);
      if (level) CHECK(near(step.efficiency, run.truths[i].truth.efficiency));
      if (step.kind == "standby" || step.kind == "no load")
        CHECK(near(step.input_power, run.truths[i].truth.input_power_w));
    }
    CHECK(run.result.curve.size() == 9);  // levels only
    CHECK(near(run.result.no_load, run.truths[2].truth.input_power_w));
    CHECK(near(run.result.standby, run.truths[1].truth.input_power_w));

    const auto& zero = check_of(run.result, "zero", "input current");
    CHECK(zero.applied);
    REQUIRE(zero.before.known);
    REQUIRE(zero.after.known);
    const double offset_a = drawn(hookup, seed, "shunt meter", "reading", 0, 0.0).offset / 0.1;
    // Noise 2e-5 of 0.2 V, some 25 readings, through 0.1 ohm: 8 uA; a digit is 10 uA. Its bound is 200 uA.
    CHECK(zero.before.value == Approx(offset_a).margin(60e-6));
    CHECK(zero.after.value == Approx(offset_a).margin(60e-6));
    // Displayed to 0.1 V, with an offset of up to 1.5 digits.
    CHECK(std::abs(check_of(run.result, "zero", "input voltage").before.value) <= 0.2 + 1e-9);

    REQUIRE(run.result.closure.size() == 1);
    CHECK(run.result.closure[0].difference.known);
    closures_held += run.result.closure[0].held ? 1 : 0;
    for (const auto& decision : run.result.decisions) {
      if (decision.quantity == "standby" || decision.quantity == "no_load")
        CHECK(decision.decision == "pass");
    }
  }
  CHECK(closures_held >= 4);
}

TEST_CASE("the Stoat's voltmeters, tied at two levels") {
  const auto hookup = sample_hookup("stoat.hookup.json");
  for (std::uint64_t seed = 1; seed <= 5; ++seed) {
    CAPTURE(seed);
    VirtualChoice choice;
    choice.seed = seed;
    const auto run = run_virtually(hookup, sample_stair("stoat.stair.json"), choice);
    CHECK(run.last.phase == sequencer::RunPhase::done);
    CHECK(run.last.warnings.empty());
    CHECK(run.last.trips.empty());
    CHECK(done_by_hand(run) == std::vector<std::string>{"tie input voltage, output voltage", "restore"});
    REQUIRE(run.result.steps.size() == 12);
    CHECK_FALSE(run.result.steps[0].efficiency.known);
    const auto& tie = check_of(run.result, "tie", "output voltage");
    CHECK(tie.applied);
    const auto first = drawn(hookup, seed, "input voltmeter", "voltage", 1, 11.5);
    const auto other = drawn(hookup, seed, "output voltmeter", "voltage", 1, 11.5);
    CHECK(near(tie.ratio, (1.0 + other.gain) / (1.0 + first.gain)));
    // At the tie's levels the two differ by what was drawn for both.
    const auto read = [&](const char* name, std::size_t step) {
      const auto channel = std::find_if(run.stored.channels.begin(), run.stored.channels.end(),
                                        [&](const auto& one) { return one.entry.name == name; });
      double sum = 0.0;
      int count = 0;
      for (std::size_t i = 0; i < channel->t_ns.size(); ++i) {
        // Not those whose conversion reaches out of the window, where the source is turned.
        if (channel->t_ns[i] < *run.stored.steps[step].average_begin_ns + 100'000'000 ||
            channel->t_ns[i] > *run.stored.steps[step].average_end_ns - 100'000'000)
          continue;
        sum += channel->value[i];
        ++count;
      }
      REQUIRE(count > 0);
      return sum / count;
    };
    for (const std::size_t step : {0U, 1U}) {
      const double volts = step == 0 ? 10.5 : 12.5;
      const auto a = drawn(hookup, seed, "input voltmeter", "voltage", 1, volts);
      const auto b = drawn(hookup, seed, "output voltmeter", "voltage", 1, volts);
      const double expected = (b.gain - a.gain) * volts + b.offset - a.offset;
      // Noise 2e-5 of 10 V on each of some six readings, and half a digit of 1 mV.
      CHECK(read("output voltage", step) - read("input voltage", step) == Approx(expected).margin(0.0015));
    }
    for (std::size_t i = 2; i < 12; ++i) CHECK(run.result.steps[i].efficiency.known);
  }
}

}  // namespace
}  // namespace loadstair::whole
