// A whole stair without a single linked meter: four hand-held meters, a load that is switched by hand, a
// person who reads and types (issue 2, point 3).
#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <map>
#include <optional>

#include "analysis/base/number.h"
#include "whole/reply_join.h"

namespace loadstair::whole {
namespace {

constexpr const char* kHookup = R"({
  "format": 1,
  "bench": "north bench, by hand",
  "channels": [
    {"name": "input voltage", "typed": true, "quantity": "voltage", "unit": "V", "low": 40, "high": 56,
     "ranges": [{"upto": 60, "reading_percent": 0.05, "digits": 2, "resolution": 0.01, "impedance_ohm": 10e6}]},
    // The most that is expected here is too little for the last step: there the person has to confirm.
    {"name": "input current", "typed": true, "quantity": "current", "unit": "A", "low": 0, "high": 2.8,
     "ranges": [{"upto": 10, "reading_percent": 0.2, "digits": 3, "resolution": 0.001, "impedance_ohm": 0.02}]},
    {"name": "output voltage", "typed": true, "quantity": "voltage", "unit": "V", "low": 11, "high": 13,
     "ranges": [{"upto": 20, "reading_percent": 0.05, "digits": 2, "resolution": 0.001, "impedance_ohm": 10e6}]},
    {"name": "output current", "typed": true, "quantity": "current", "unit": "A", "low": 0, "high": 15,
     "ranges": [{"upto": 20, "reading_percent": 0.2, "digits": 3, "resolution": 0.001, "impedance_ohm": 0.005}]}
  ],
  "ports": [
    {"name": "input", "direction": "input", "kind": "dc", "voltage": "input voltage", "current": "input current",
     "voltmeter": "converter", "sensed": true},
    {"name": "output", "direction": "output", "kind": "dc", "voltage": "output voltage",
     "current": "output current", "voltmeter": "converter", "sensed": true}
  ],
  "loads": [{"name": "6 ohm", "kind": "resistor", "power_w": 24, "voltage_v": 12, "count": 6}],
  "rehearsal": {
    "kind": "dcdc", "sense": "average",
    "converter": {"no_load_w": 1.8, "linear": 0.01, "quadratic_per_w": 7e-5, "resistance_rise_per_k": 0.004,
                  "standby_w": 0.2, "output_voltage_v": 12, "output_impedance_ohm": 0.002, "soft_start_s": 0.02,
                  "sense_threshold_v": 0.05, "sense_ohm": 0.002, "least_input_voltage_v": 36},
    "source": {"voltage_v": 48, "resistance_ohm": 0.01, "current_limit_a": 7, "lead_ohm": 0.01},
    "load": {"lead_ohm": 0.005, "greatest_current_a": 30},
    // Slow enough that the conduction loss still rises between the rounds.
    "thermal": {"ambient_c": 23.0, "junction_to_case_k_per_w": 0.8, "case_to_air_k_per_w": 2.4,
                "case_to_air_fan_k_per_w": 2.4, "junction_time_s": 0.3, "case_time_s": 20.0},
    "meters": {"noise_share": 1e-5},
    "person": {"look_s": 0.9, "type_s": 1.6}
  }
})";

constexpr const char* kStair = R"({
  "format": 1,
  "prototype": {"name": "Stoat", "revision": "B", "unit": "B-002"},
  "ratings": {"input_voltage_v": 48, "output_voltage_v": 12, "output_power_w": 150},
  "steps": [
    {"label": "two resistors", "load_w": 48, "prompt": "Switch two resistors on.", "hand_action": "resistors 2",
     "soak_s": 10, "average_s": 25},
    {"label": "four resistors", "load_w": 96, "prompt": "Switch four resistors on.", "hand_action": "resistors 4",
     "soak_s": 10, "average_s": 25},
    {"label": "six resistors", "load_w": 144, "prompt": "Switch six resistors on.", "hand_action": "resistors 6",
     "soak_s": 10, "average_s": 25}
  ],
  "end": {"discharge_s": 2}
})";

constexpr std::uint64_t kSeeds = 5;
constexpr std::int32_t kCorrectedStep = 1;
constexpr std::int32_t kConfirmedStep = 2;
constexpr double kLook_s = 0.9;
constexpr double kType_s = 1.6;

template <class T>
T must(base::Outcome<T> outcome) {
  INFO((outcome ? std::string{} : outcome.refusal().text()));
  REQUIRE(outcome.ok());
  return *std::move(outcome);
}

/// Somebody looks again at the output voltage of the second step and corrects its last digit.
struct SecondLook {
  bool done = false;
  double before = 0.0, after = 0.0;

  void operator()(sequencer::Sequencer& sequencer, const sequencer::Snapshot& now) {
    if (done || now.step != kCorrectedStep) return;
    for (const auto& typed : now.typed) {
      if (typed.channel != "output voltage" || typed.round != 1 || typed.superseded) continue;
      before = typed.value;
      const auto text = base::print_fixed(typed.value + 0.001, 3);
      after = *base::parse_number(text);
      const auto taken = sequencer.enter_typed(typed.prompt, {text, "V", "20", "0.001"}, "terminal");
      INFO((taken ? std::string{} : taken.refusal().text()));
      REQUIRE(taken.ok());
      done = true;
      return;
    }
  }
};

struct ByHand {
  setup::Hookup hookup;
  VirtualRun run;
  SecondLook second_look;
};

ByHand by_hand(std::uint64_t seed, std::vector<rehearsal::Fault> faults = {}) {
  ByHand made;
  made.hookup = must(setup::read_hookup(kHookup, "by_hand.hookup.json"));
  const auto stair = must(setup::read_stair(kStair, "by_hand.stair.json"));
  VirtualChoice choice;
  choice.seed = seed;
  choice.faults = std::move(faults);
  // The source has no interface either: it is on before the run begins.
  choice.adjust = [](rehearsal::BenchDescription& bench) { bench.at_start.source_on = true; };
  auto& look = made.second_look;
  choice.each_look = [&look](sequencer::Sequencer& sequencer, const sequencer::Snapshot& now) {
    look(sequencer, now);
  };
  made.run = run_virtually(made.hookup, stair, choice);
  return made;
}

std::string name_of(const ByHand& made, const store::StoredTypedAnswer& answer) {
  return made.hookup.channels[static_cast<std::size_t>(answer.channel)].name;
}

bool superseded(const store::StoredTypedAnswer& answer) {
  return (answer.flags & instrument::kSuperseded) != 0U;
}

/// When the rehearsed person looked at the display, UTC; 0: not within this prompt.
std::int64_t looked_ns(const ByHand& made, const store::StoredTypedAnswer& answer) {
  std::int64_t looked = 0;
  for (const auto& entry : made.run.log) {
    const bool within = entry.sent_wall_ns >= answer.prompted_ns && entry.sent_wall_ns <= answer.entered_ns;
    if (entry.kind == "typed" && entry.query == name_of(made, answer) && within)
      looked = entry.sent_wall_ns - std::llround(kType_s * 1e9);
  }
  return looked;
}

void check_rounds(const ByHand& made) {
  std::map<std::int32_t, std::vector<std::string>> asked;
  for (const auto& answer : made.run.stored.typed) {
    if (superseded(answer)) continue;
    asked[answer.step].push_back(name_of(made, answer) + " " + base::print_integer(answer.round));
  }
  // The record keeps a correction after what it corrects, wherever that comes in the order of entry.
  for (auto& [step, names] : asked) {
    if (step == kCorrectedStep) {
      std::sort(names.begin(), names.end());
      CHECK(names == std::vector<std::string>{"input current 1", "input current 2", "input voltage 1",
                                              "input voltage 2", "output current 1", "output current 2",
                                              "output voltage 1", "output voltage 2"});
      continue;
    }
    CHECK(names == std::vector<std::string>{"input voltage 1", "input current 1", "output voltage 1",
                                            "output current 1", "output current 2", "output voltage 2",
                                            "input current 2", "input voltage 2"});
  }
  CHECK(asked.size() == 3);
}

/// The true reading instant lies between prompt and entry: within the half-width around their middle.
void check_times(const ByHand& made) {
  for (const auto& answer : made.run.stored.typed) {
    const auto& step = made.run.stored.steps[static_cast<std::size_t>(answer.step)];
    const double took_s = static_cast<double>(answer.entered_ns - answer.prompted_ns) * 1e-9;
    CAPTURE(name_of(made, answer), answer.step, answer.round, answer.text, took_s);
    CHECK(answer.prompted_ns >= *step.average_begin_ns);
    CHECK(answer.entered_ns <= *step.average_end_ns);
    const auto looked = looked_ns(made, answer);
    CHECK(looked >= answer.prompted_ns);
    CHECK(looked <= answer.entered_ns);
    CHECK(took_s >= kLook_s + kType_s);
    // The person sees a prompt within a tenth of a second; what is confirmed is read at least twice.
    const bool confirmed = (answer.flags & instrument::kImplausible) != 0U;
    CHECK((confirmed ? took_s >= 2.0 * (kLook_s + kType_s) : took_s <= kLook_s + kType_s + 0.11));
  }
}

void check_correction(const ByHand& made) {
  REQUIRE(made.second_look.done);
  const auto& typed = made.run.stored.typed;
  CHECK(std::count_if(typed.begin(), typed.end(), superseded) == 1);
  const auto old = std::find_if(typed.begin(), typed.end(), superseded);
  REQUIRE(old != typed.end());
  CHECK(old->step == kCorrectedStep);
  CHECK(name_of(made, *old) == "output voltage");
  CHECK(old->value == made.second_look.before);
  const auto successor = std::find_if(typed.begin(), typed.end(), [&](const auto& answer) {
    return answer.step == old->step && answer.channel == old->channel && answer.round == old->round &&
           !superseded(answer);
  });
  REQUIRE(successor != typed.end());
  CHECK(successor->value == made.second_look.after);
  // What was written down is repaired, not when the meter was read.
  CHECK(successor->prompted_ns == old->prompted_ns);
  CHECK(successor->entered_ns == old->entered_ns);
  const auto& events = made.run.stored.events;
  CHECK(std::count_if(events.begin(), events.end(), [](const auto& event) {
          return event.kind == "corrected" && event.source == "output voltage";
        }) == 1);
  // The display never showed what the second look made of it; everything else that was typed it did.
  const auto join = join_replies(made.run, made.hookup);
  INFO(join.text());
  CHECK(join.typed_values == 24);
  REQUIRE(join.wrong.size() == 1);
  CHECK_THAT(join.wrong[0], Catch::StartsWith("output voltage typed \"" + successor->text + "\""));
}

void check_confirmation(const ByHand& made) {
  std::size_t confirmed = 0;
  for (const auto& answer : made.run.stored.typed) {
    if ((answer.flags & instrument::kImplausible) == 0U) continue;
    ++confirmed;
    CHECK(answer.step == kConfirmedStep);
    CHECK(name_of(made, answer) == "input current");
    CHECK(answer.value > 2.8);
  }
  CHECK(confirmed == 2);  // both rounds of that step
  const auto& remarks = made.run.result.steps[kConfirmedStep].remarks;
  CHECK(std::any_of(remarks.begin(), remarks.end(), [](const std::string& remark) {
    return remark.starts_with("input current") && remark.find("was confirmed") != std::string::npos;
  }));
}

/// The two values of a channel in a step, as used.
std::vector<store::StoredTypedAnswer> used(const ByHand& made, std::int32_t step,
                                           const std::string& channel) {
  std::vector<store::StoredTypedAnswer> found;
  for (const auto& answer : made.run.stored.typed) {
    if (answer.step == step && name_of(made, answer) == channel && !superseded(answer))
      found.push_back(answer);
  }
  return found;
}

double mean(const ByHand& made, std::int32_t step, const std::string& channel) {
  double sum = 0.0;
  const auto values = used(made, step, channel);
  for (const auto& one : values) sum += one.value;
  return sum / static_cast<double>(values.size());
}

/// Half-width of the 95 % interval that the declared figures imply, without noise and drift: the figures are
/// rectangular bounds (JCGM 100:2008, 4.3.7), and an efficiency is a product and quotient of four values.
double implied_half_width(const ByHand& made, std::int32_t step, double efficiency) {
  double variance = 0.0;
  for (const auto& channel : made.hookup.channels) {
    const double value = mean(made, step, channel.name);
    const auto& range = channel.ranges.front();
    const double gain = range.reading_percent / 100.0;
    const double offset = range.digits * range.resolution / value;
    variance += (gain * gain + offset * offset) / 3.0;
  }
  return 1.96 * efficiency * std::sqrt(variance);
}

/// docs/methods.md, "Typed channels": half of what lies between the rounds, plus the slope between them times
/// (half-width + distance from mid-window), as a rectangular bound; the half-width is half of prompt to
/// entry. Returns: how many channels of the step moved between the rounds.
int check_spread(const ByHand& made, std::int32_t index) {
  const auto& step = made.run.stored.steps[static_cast<std::size_t>(index)];
  const auto& result = made.run.result.steps[static_cast<std::size_t>(index)];
  int moved = 0;
  for (const auto& channel : made.hookup.channels) {
    const auto rounds = used(made, index, channel.name);
    REQUIRE(rounds.size() == 2);
    const double difference = std::abs(rounds[1].value - rounds[0].value);
    if (difference == 0.0) continue;
    ++moved;
    const auto middle_s = [&](const store::StoredTypedAnswer& one) {
      return (static_cast<double>(one.prompted_ns - *step.average_begin_ns) +
              static_cast<double>(one.entered_ns - one.prompted_ns) / 2.0) *
             1e-9;
    };
    const double half_width_s = static_cast<double>(rounds[0].entered_ns - rounds[0].prompted_ns +
                                                    rounds[1].entered_ns - rounds[1].prompted_ns) /
                                4.0 * 1e-9;
    const double window_middle_s =
        static_cast<double>(*step.average_end_ns - *step.average_begin_ns) / 2.0 * 1e-9;
    const double off_s = std::abs((middle_s(rounds[0]) + middle_s(rounds[1])) / 2.0 - window_middle_s);
    const double apart_s = middle_s(rounds[1]) - middle_s(rounds[0]);
    const double bound = difference / 2.0 + difference / apart_s * (half_width_s + off_s);
    const double expected =
        result.efficiency.value * bound / std::sqrt(3.0) / mean(made, index, channel.name);
    CAPTURE(channel.name, index, difference, half_width_s, off_s, apart_s);
    const auto entry = std::find_if(result.budget.begin(), result.budget.end(), [&](const auto& one) {
      return one.source == "two rounds of " + channel.name;
    });
    REQUIRE(entry != result.budget.end());
    // The meters' burdens shift the sensitivities by less than 1e-3.
    CHECK(entry->standard_uncertainty == Approx(expected).epsilon(2e-3));
  }
  return moved;
}

TEST_CASE("a whole stair with typed channels only, over five benches") {
  std::map<std::string, std::uint64_t> holding;
  int moved = 0;
  for (std::uint64_t seed = 1; seed <= kSeeds; ++seed) {
    CAPTURE(seed);
    const auto made = by_hand(seed);
    CHECK(made.run.stored.summary.state == store::RunState::done);
    CHECK(made.run.stored.prompts.size() == 3);
    REQUIRE(made.run.stored.typed.size() == 25);
    check_rounds(made);
    check_times(made);
    check_correction(made);
    check_confirmation(made);
    for (std::int32_t index = 0; index < 3; ++index) {
      const auto& result = made.run.result.steps[static_cast<std::size_t>(index)];
      const auto& truth = made.run.truths[static_cast<std::size_t>(index)];
      CAPTURE(result.label, result.efficiency.why, result.efficiency.low, result.efficiency.value,
              result.efficiency.high);
      CHECK(result.result_state == "measured");
      REQUIRE((result.efficiency.known && result.efficiency.uncertainty_known));
      REQUIRE(truth.known);
      const double half_width = (result.efficiency.high - result.efficiency.low) / 2.0;
      const double implied = implied_half_width(made, index, truth.truth.efficiency);
      CAPTURE(truth.truth.efficiency, half_width, implied);
      CHECK(half_width <= 2.0 * implied);
      // A coverage factor of 1.96 on four rectangles is a little too large, so a little less is right.
      CHECK(half_width >= 0.9 * implied);
      if (truth.truth.efficiency >= result.efficiency.low && truth.truth.efficiency <= result.efficiency.high)
        ++holding[result.label];
      moved += check_spread(made, index);
    }
    // Nothing here can be switched off by the program: it says so, and the source is still on.
    REQUIRE(made.run.last.warnings.size() == 1);
    CHECK_THAT(made.run.last.warnings[0], Catch::Contains("Switch it off by hand"));
    CHECK_FALSE(made.run.source_off);
  }
  for (const auto& step : {"two resistors", "four resistors", "six resistors"}) {
    CAPTURE(step);
    CHECK(holding[step] >= kSeeds - 1);
  }
  CHECK(moved > 0);
}

TEST_CASE("a display that shows an overload gives no typed value; the person reads it again") {
  rehearsal::Fault fault;
  fault.instrument = "meter of output current";
  fault.kind = rehearsal::FaultKind::overload;
  fault.at_query = 1;
  const auto made = by_hand(1, {fault});
  const auto& log = made.run.log;
  CHECK(std::count_if(log.begin(), log.end(), [](const auto& entry) {
          return entry.kind == "typed" && entry.fault == "overload" && entry.reply.starts_with("OL");
        }) == 1);
  CHECK(made.run.stored.summary.state == store::RunState::done);
  CHECK(made.run.stored.typed.size() == 25);
  const auto first = used(made, 0, "output current");
  REQUIRE(first.size() == 2);
  // Its prompt was open for two readings.
  CHECK(static_cast<double>(first[0].entered_ns - first[0].prompted_ns) * 1e-9 >= 2.0 * (kLook_s + kType_s));
  const auto& efficiency = made.run.result.steps[0].efficiency;
  CHECK(efficiency.known);
  CHECK(std::abs(efficiency.value - made.run.truths[0].truth.efficiency) <= efficiency.high - efficiency.low);
}

}  // namespace
}  // namespace loadstair::whole
