// Each fault of each kind of instrument against each guard action, on a whole bench in virtual time, with its
// expected end state; and after each: every good reading joined to what was sent, every fault found in the
// record, and no result that is both claimed and wrong (issue 2, "Must show").
#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <map>
#include <set>

#include "whole/reply_join.h"

namespace loadstair::whole {
namespace {

using rehearsal::Fault;
using rehearsal::FaultKind;
using store::RunState;
using store::StepState;

constexpr const char* kWattmeter = "output wattmeter";
constexpr const char* kShuntMeter = "shunt meter";
constexpr const char* kThermometer = "thermocouple reader";
constexpr const char* kLoad = "ac load";
constexpr std::size_t kFaulty = 1;  // place of the step in whose averaging window the fault lies

enum class Action { stop, hold, next, ignore };
constexpr Action kActions[] = {Action::stop, Action::hold, Action::next, Action::ignore};

const char* name_of(Action action) {
  switch (action) {
    case Action::stop:
      return "stop";
    case Action::hold:
      return "hold";
    case Action::next:
      return "next";
    case Action::ignore:
      return "ignore";
  }
  return "";
}

/// What the guard sees of a fault.
enum class Trip {
  none,
  missing,
  limit,  ///< an impossible value; a limit cannot be ignored: where missing is, it stops
};

/// What may stay hidden, because nothing that was sent tells of it.
enum class Limit {
  none,
  /// A bare number carries no unit: only a guard, and a range that is left behind, can doubt it.
  bare_number,
  /// A meter that prints by itself may print twice: the second line is right, and says so again.
  line_again,
};

/// What becomes of the last step where the run goes on although the fault does too.
enum class Last {
  done,     ///< the fault ends before its readings are missed again
  left,     ///< missed again, left again
  stopped,  ///< its set point cannot be confirmed: the run is stopped
};

struct Row {
  FaultKind kind;
  double length_s;
  Trip trip;
  std::vector<std::string> events;  ///< of the instrument, told during the run
  Limit limit = Limit::none;
  Last under_next = Last::done;
  Last under_ignore = Last::done;
};

void insert(std::string& text, const std::string& after, const std::string& what) {
  const auto place = text.find(after);
  REQUIRE(place != std::string::npos);
  text.insert(place + after.size(), what);
}

/// The sample bench, and the load's own readings as channels of a port that does not count, so that a guard
/// can look at them.
setup::Hookup bench() {
  const auto sample = sample_hookup();
  auto text = sample.text;
  insert(text, "\"channels\": [",
         R"({"name": "load voltage", "instrument": "ac load", "value": "voltage", "quantity": "voltage",
             "unit": "V", "response": "true-rms-ac-dc",
             "ranges": [{"upto": 300, "reading_percent": 0.5, "range_percent": 0.1, "resolution": 0.01}]},
            {"name": "load power", "instrument": "ac load", "value": "power", "quantity": "power", "unit": "W",
             "ranges": [{"upto": 750, "reading_percent": 0.5, "range_percent": 0.1, "resolution": 0.01}]},)");
  insert(
      text, "\"ports\": [",
      R"({"name": "load side", "direction": "output", "kind": "ac", "counted": false, "power": "load power",
             "voltage": "load voltage", "voltmeter": "outer"},)");
  auto hookup = setup::read_hookup(text, sample.file);
  INFO((hookup ? "" : hookup.refusal().text()));
  REQUIRE(hookup.ok());
  for (auto& instrument : hookup->instruments) {
    if (instrument.name == kLoad) instrument.poll_s = 0.25;
  }
  return *hookup;
}

/// Three steps of the sample stair, without their long waits.
setup::Stair short_stair() {
  auto stair = sample_stair();
  std::erase_if(stair.steps, [](const setup::Step& step) {
    return step.label != "20 %" && step.label != "50 %" && step.label != "75 %";
  });
  REQUIRE(stair.steps.size() == 3);
  for (auto& step : stair.steps) {
    step.thermal.reset();
    REQUIRE(step.electrical);
    step.electrical->window_s = 1.5;
  }
  stair.guards.clear();
  // Long enough for a load that was away to come back and be made safe before the run's end.
  stair.end.discharge_s = 12.0;
  return stair;
}

setup::Guard guard_of(const std::string& instrument, Action action) {
  setup::Guard guard;
  guard.name = "watch";
  guard.missing_after_s = 1.0;
  guard.blanking_s = 1.5;
  if (instrument == kWattmeter) {
    guard.channel = "output voltage";
    guard.above = 264;
  } else if (instrument == kShuntMeter) {
    guard.channel = "input current";
    guard.above = 2.5;
  } else if (instrument == kThermometer) {
    guard.channel = "heatsink";
    guard.above = 95;
  } else {
    guard.channel = "load voltage";
    guard.above = 264;
  }
  guard.action = action == Action::hold   ? setup::GuardAction::hold
                 : action == Action::next ? setup::GuardAction::next
                                          : setup::GuardAction::stop;
  guard.missing = action == Action::stop   ? setup::MissingAction::stop
                  : action == Action::hold ? setup::MissingAction::hold
                  : action == Action::next ? setup::MissingAction::next
                                           : setup::MissingAction::ignore;
  return guard;
}

/// Seconds from the bench's start to the middle of the faulty step's averaging window, without any fault.
double middle_of_window(const setup::Hookup& hookup) {
  const auto run = run_virtually(hookup, short_stair(), {});
  const auto& step = run.stored.steps.at(kFaulty);
  REQUIRE(step.average_end_ns);
  return (static_cast<double>(*step.average_begin_ns - run.stored.utc_offset_ns) +
          static_cast<double>(*step.average_end_ns - *step.average_begin_ns) / 2.0) *
         1e-9;
}

std::vector<Fault> script(const std::string& instrument, const Row& row, double at_s) {
  Fault fault;
  fault.instrument = instrument;
  fault.kind = row.kind;
  fault.at_s = at_s;
  fault.length_s = row.length_s;
  fault.delay_s = 2.5;
  if (row.kind != FaultKind::wrong_identity) return {fault};
  // Somebody unplugs it and plugs another one in.
  Fault away = fault;
  away.kind = FaultKind::vanish;
  away.length_s = 1.0;
  return {away, fault};
}

std::vector<StepState> expected_steps(const Row& row, Action action) {
  if (row.trip == Trip::none || action == Action::hold)
    return {StepState::done, StepState::done, StepState::done};
  const auto last_step = [](Last last) {
    return last == Last::done   ? StepState::done
           : last == Last::left ? StepState::skipped
                                : StepState::stopped;
  };
  if (action == Action::next) return {StepState::done, StepState::skipped, last_step(row.under_next)};
  if (action == Action::ignore && row.trip == Trip::missing)
    return {StepState::done, StepState::done, last_step(row.under_ignore)};
  return {StepState::done, StepState::stopped, StepState::waiting};
}

std::set<std::string> kinds_of_events(const store::StoredRun& run, const std::string& source) {
  std::set<std::string> kinds;
  for (const auto& event : run.events) {
    if (event.source == source) kinds.insert(event.kind);
  }
  return kinds;
}

/// What can be on this bench at all, in what the meter shows.
struct Span {
  double low = 0.0, high = 0.0;
};
const std::map<std::string, Span> kPossible = {
    {"output voltage", {-0.1, 300}}, {"output current", {-0.01, 6}},
    {"output power", {-0.2, 750}},   {"output frequency", {-0.1, 51}},
    {"input current", {-1e-4, 0.2}}, {"heatsink", {15, 150}},
    {"ambient", {15, 35}},           {"load voltage", {-0.5, 300}},
    {"load power", {-1, 750}}};

void check_possible(const VirtualRun& run) {
  for (const auto& channel : run.stored.channels) {
    if (channel.entry.instrument.empty()) continue;
    const auto span = kPossible.at(channel.entry.name);
    for (std::size_t i = 0; i < channel.value.size(); ++i) {
      if ((channel.flags[i] & instrument::kUnusable) != 0U) continue;
      if (channel.value[i] >= span.low && channel.value[i] <= span.high) continue;
      FAIL_CHECK(channel.entry.name << " = " << channel.value[i] << " is recorded as good");
      break;
    }
  }
}

/// A result holds the truth within twice its interval, or says why there is none.
void check_results(const VirtualRun& run) {
  for (std::size_t i = 0; i < run.result.steps.size(); ++i) {
    const auto& step = run.result.steps[i];
    CAPTURE(step.label, step.state, step.result_state, step.efficiency.value, step.efficiency.why);
    if (!step.efficiency.known || !step.efficiency.uncertainty_known) {
      CHECK_FALSE(step.efficiency.why.empty());
      continue;
    }
    REQUIRE(run.truths[i].known);
    const double truth = run.truths[i].truth.efficiency;
    CAPTURE(truth, step.efficiency.low, step.efficiency.high);
    CHECK(std::abs(step.efficiency.value - truth) <= step.efficiency.high - step.efficiency.low);
    CHECK(run.stored.steps[i].state == StepState::done);
  }
}

void check_end(const VirtualRun& run, const std::string& instrument, const Row& row, Action action) {
  const bool guarded_stop = row.trip == Trip::limit ? action == Action::stop || action == Action::ignore
                                                    : row.trip == Trip::missing && action == Action::stop;
  const bool stops = guarded_stop || (action == Action::next && row.under_next == Last::stopped) ||
                     (action == Action::ignore && row.under_ignore == Last::stopped);
  const bool trips = row.trip == Trip::limit || (row.trip == Trip::missing && action != Action::ignore);
  CHECK(run.stored.summary.state == (stops ? RunState::stopped : RunState::done));
  const auto expected = expected_steps(row, action);
  for (std::size_t i = 0; i < expected.size(); ++i) {
    CAPTURE(i, store::name_of(expected[i]));
    CHECK(std::string{store::name_of(run.stored.steps[i].state)} == store::name_of(expected[i]));
  }
  CHECK(run.source_off);
  CHECK(run.load_off);
  CHECK(run.last.warnings.empty());

  const auto told = kinds_of_events(run.stored, instrument);
  for (const auto& kind : row.events) {
    CAPTURE(kind, told);
    CHECK(told.count(kind) == 1);
  }
  CHECK((kinds_of_events(run.stored, "watch").count("guard") == 1) == trips);
  const auto sequencer = kinds_of_events(run.stored, "sequencer");
  CHECK((sequencer.count("stop") == 1) == stops);
  CHECK((sequencer.count("hold") == 1) == (trips && action == Action::hold));
  CHECK((sequencer.count("resume") == 1) == (trips && action == Action::hold));
  if (guarded_stop) CHECK_THAT(run.stored.end_reason, Catch::Contains("guard \"watch\""));
  if (stops && !guarded_stop) CHECK_THAT(run.stored.end_reason, Catch::Contains("cannot set load power"));
  if (trips && action == Action::next)
    CHECK_THAT(run.stored.steps[kFaulty].reason, Catch::Contains("guard \"watch\""));
}

void check_join(const VirtualRun& run, const setup::Hookup& hookup, const std::string& instrument,
                const Row& row) {
  const auto join = join_replies(run, hookup);
  INFO(join.text());
  CHECK(join.good_readings > 500);
  CHECK(join.typed_values >= 2);
  CHECK(join.faults > 0);
  CHECK(join.wrong.empty());
  CHECK(join.hidden.empty() == (row.limit == Limit::none));
  for (const auto& fault : join.hidden) {
    CHECK(fault.instrument == instrument);
    CHECK(fault.kind == rehearsal::name_of(row.kind));
  }
  if (row.limit != Limit::bare_number) check_possible(run);
}

void check_all(const setup::Hookup& hookup, double at_s, const std::string& instrument,
               const std::vector<Row>& rows) {
  for (const auto& row : rows) {
    for (const Action action : kActions) {
      CAPTURE(instrument, rehearsal::name_of(row.kind), name_of(action));
      auto stair = short_stair();
      stair.guards = {guard_of(instrument, action)};
      VirtualChoice choice;
      choice.faults = script(instrument, row, at_s);
      choice.resume_holds = true;
      const auto run = run_virtually(hookup, stair, choice);
      check_end(run, instrument, row, action);
      check_join(run, hookup, instrument, row);
      check_results(run);
    }
  }
}

void check_all(const std::string& instrument, const std::vector<Row>& rows) {
  const auto hookup = bench();
  check_all(hookup, middle_of_window(hookup), instrument, rows);
}

TEST_CASE("without a fault every reading joins and nothing is told") {
  const auto hookup = bench();
  const auto run = run_virtually(hookup, short_stair(), {});
  const auto join = join_replies(run, hookup);
  INFO(join.text());
  CHECK(join.wrong.empty());
  CHECK(join.faults == 0);
  CHECK(join.good_readings > 1000);
  check_possible(run);
  check_results(run);
}

// The lengths leave a margin of a quarter of a second to every limit, wherever the fault falls between two
// polls. A garbled or swallowed identity is waited for during five timeouts, then the link is opened anew:
// such an instrument stays away for 6 s at least.
TEST_CASE("faults of the SCPI wattmeter against each guard action") {
  const auto none = Limit::none;
  check_all(kWattmeter,
            {
                {FaultKind::silence, 1.2, Trip::missing, {"timeout", "resynchronised"}},
                {FaultKind::late, 0.5, Trip::missing, {"timeout", "resynchronised"}, none, Last::left},
                {FaultKind::garbage, 1.3, Trip::missing, {"garbage"}, none, Last::left},
                {FaultKind::truncated, 1.3, Trip::missing, {"garbage"}, none, Last::left},
                {FaultKind::duplicate, 0.15, Trip::none, {"garbage", "resynchronised"}},
                {FaultKind::overload, 1.3, Trip::limit, {"overload"}},
                {FaultKind::vanish, 3.0, Trip::missing, {"lost", "connected"}, none, Last::left},
                {FaultKind::wrong_identity, 7.9, Trip::missing, {"lost", "identity wrong"}, none, Last::left},
                {FaultKind::unit_change, 1.3, Trip::limit, {}, Limit::bare_number},
            });
}

const std::vector<Row>& rows_of_printing_meters() {
  // A meter that prints lines has no identity that could be wrong.
  static const std::vector<Row> rows = {
      {FaultKind::silence, 3.0, Trip::missing, {"timeout"}, Limit::none, Last::left},
      {FaultKind::late, 0.5, Trip::missing, {"timeout"}, Limit::none, Last::left},
      {FaultKind::garbage, 1.3, Trip::missing, {"garbage"}},
      {FaultKind::truncated, 1.3, Trip::missing, {"garbage"}},
      {FaultKind::duplicate, 1.3, Trip::none, {}, Limit::line_again},
      {FaultKind::overload, 1.3, Trip::limit, {"overload"}},
      {FaultKind::vanish, 3.0, Trip::missing, {"lost", "connected"}, Limit::none, Last::left},
      {FaultKind::unit_change, 1.3, Trip::missing, {"unit changed"}},
  };
  return rows;
}

TEST_CASE("faults of the text-line shunt meter against each guard action") {
  check_all(kShuntMeter, rows_of_printing_meters());
}

TEST_CASE("faults of the thermocouple reader against each guard action") {
  check_all(kThermometer, rows_of_printing_meters());
}

// A load that cannot be asked cannot be set either: the step after the fault stops the run.
TEST_CASE("faults of the SCPI load on TCP against each guard action") {
  const auto none = Limit::none;
  const auto stopped = Last::stopped;
  check_all(
      kLoad,
      {
          {FaultKind::silence, 8.0, Trip::missing, {"timeout", "lost"}, none, stopped, stopped},
          {FaultKind::late, 0.5, Trip::missing, {"timeout", "resynchronised"}, none, Last::left},
          {FaultKind::garbage, 7.5, Trip::missing, {"garbage", "lost"}, none, stopped, stopped},
          {FaultKind::truncated, 8.3, Trip::missing, {"garbage", "lost"}, none, stopped, stopped},
          {FaultKind::duplicate, 0.3, Trip::none, {"garbage", "resynchronised"}},
          {FaultKind::overload, 1.3, Trip::limit, {"overload"}},
          {FaultKind::vanish, 3.0, Trip::missing, {"lost", "connected"}, none, Last::left},
          {FaultKind::wrong_identity, 7.9, Trip::missing, {"lost", "identity wrong"}, none, stopped, stopped},
          {FaultKind::unit_change, 1.3, Trip::limit, {}, Limit::bare_number},
      });
}

// The same wattmeter with a profile that asks for the function. It is asked at the beginning of each round,
// at every tenth of a second, and the values some 20 ms later.
TEST_CASE("a turned knob shows where the profile asks for the function") {
  auto hookup = bench();
  for (auto& instrument : hookup.instruments) {
    if (instrument.name != kWattmeter) continue;
    instrument.profile.function_query = "FUNC?";
    instrument.profile.function_reply = "POW:AC";
  }
  const Row row{FaultKind::unit_change, 1.3, Trip::missing, {"unit changed"}};
  const double round_s = std::floor(middle_of_window(hookup) * 10.0) / 10.0;
  SECTION("between two rounds: nothing is hidden") {
    check_all(hookup, round_s + 0.07, kWattmeter, {row});
  }
  SECTION("within a round: its readings are good, and no others") {
    auto stair = short_stair();
    stair.guards = {guard_of(kWattmeter, Action::stop)};
    VirtualChoice choice;
    choice.faults = script(kWattmeter, row, round_s + 0.01);
    const auto run = run_virtually(hookup, stair, choice);
    const auto join = join_replies(run, hookup);
    INFO(join.text());
    CHECK(join.wrong.empty());
    CHECK(join.hidden.size() == 4);  // the channels of one reply
    CHECK(run.last.trips.size() == 1);
    CHECK(run.stored.steps[kFaulty].state == StepState::stopped);
  }
}

/// What shows nowhere but as a gap, or not at all, and why. Stated here so that nobody believes otherwise.
struct KnownLimit {
  const char* instrument;
  FaultKind kind;
  std::optional<std::int64_t> at_query;  ///< nullopt: in the middle of the faulty step's window
  double length_s;
  double delay_s;
  const char* why;
};

TEST_CASE("known limits: what nothing on the line tells of") {
  const auto hookup = bench();
  const double at_s = middle_of_window(hookup);
  const KnownLimit limits[] = {
      {kWattmeter, FaultKind::unit_change, {}, 1.5, 0, "a bare number carries no unit; no guard looks here"},
      {kLoad, FaultKind::truncated, 2, 0, 0, "the very first number: there is no form yet that it breaks"},
      {kWattmeter, FaultKind::stale, {}, 1.5, 0, "a value may well repeat: told after 50 conversions"},
      {kShuntMeter, FaultKind::silence, {}, 1.5, 0, "lines are missed after 2 s; guards look sooner"},
      {kShuntMeter, FaultKind::late, {}, 0.3, 1.0, "no question tells when a line was due; the gap shows"},
      {kShuntMeter, FaultKind::duplicate, {}, 1.5, 0, "a line that comes again is right, and says it again"},
  };
  for (const auto& limit : limits) {
    CAPTURE(limit.instrument, rehearsal::name_of(limit.kind), limit.why);
    Fault fault;
    fault.instrument = limit.instrument;
    fault.kind = limit.kind;
    fault.length_s = limit.length_s;
    fault.delay_s = limit.delay_s;
    fault.at_query = limit.at_query;
    if (!limit.at_query) fault.at_s = at_s;
    VirtualChoice choice;
    choice.faults = {fault};
    const auto run = run_virtually(hookup, short_stair(), choice);
    const auto join = join_replies(run, hookup);
    INFO(join.text());
    CHECK(join.wrong.empty());  // never the reply to another query, not even here
    CHECK_FALSE(join.hidden.empty());
    for (const auto& hidden : join.hidden) {
      CHECK(hidden.instrument == limit.instrument);
      CHECK(hidden.kind == rehearsal::name_of(limit.kind));
    }
    check_results(run);
  }
}

TEST_CASE("a bare number in another unit leaves its range, and the result says so") {
  const auto hookup = bench();
  VirtualChoice choice;
  choice.faults = script(kWattmeter, {FaultKind::unit_change, 1.5, Trip::none, {}}, middle_of_window(hookup));
  const auto run = run_virtually(hookup, short_stair(), choice);
  const auto& efficiency = run.result.steps[kFaulty].efficiency;
  CHECK_FALSE((efficiency.known && efficiency.uncertainty_known));
  CHECK_THAT(efficiency.why, Catch::Contains("beyond the largest range"));
}

// A display on hold is told after 50 conversions (drivers/instrument/stuck.h), that is 5 s here; until then
// nothing tells it from a steady bench.
TEST_CASE("a display on hold is called stale, and its readings are not used from then on") {
  const auto hookup = bench();
  auto stair = short_stair();
  stair.steps[kFaulty].average_s = 20;
  const double at_s = middle_of_window(hookup);
  VirtualChoice choice;
  choice.faults = script(kWattmeter, {FaultKind::stale, 12.0, Trip::none, {}}, at_s);
  const auto run = run_virtually(hookup, stair, choice);
  const auto since_ns = run.stored.utc_offset_ns + std::llround(at_s * 1e9);
  CHECK(join_replies(run, hookup).wrong.empty());
  CHECK(kinds_of_events(run.stored, kWattmeter).count("stale") == 1);
  for (const auto& channel : run.stored.channels) {
    if (channel.entry.name != "output power") continue;
    for (std::size_t i = 0; i < channel.t_ns.size(); ++i) {
      const double after_s = static_cast<double>(channel.t_ns[i] - since_ns) * 1e-9;
      if (after_s < 5.5 || after_s > 11.5) continue;
      CAPTURE(after_s);
      CHECK((channel.flags[i] & instrument::kStale) != 0U);
    }
  }
  check_results(run);
}

/// Each of these breaks one thing in a run that joined.
TEST_CASE("the join finds what does not join") {
  const auto hookup = bench();
  VirtualChoice choice;
  choice.faults = script(kWattmeter, {FaultKind::silence, 1.5, Trip::none, {}}, middle_of_window(hookup));
  const auto whole = run_virtually(hookup, short_stair(), choice);
  REQUIRE(join_replies(whole, hookup).text().empty());
  const auto channel = [](VirtualRun& run, const std::string& name) -> store::StoredChannel& {
    for (auto& one : run.stored.channels) {
      if (one.entry.name == name) return one;
    }
    FAIL("no channel " << name);
    throw;
  };
  const auto wrong = [&](const VirtualRun& run) { return join_replies(run, hookup).wrong.size(); };
  const std::size_t place = 100;

  SECTION("a value that the reply does not say") {
    for (const auto* name : {"output power", "input current", "heatsink", "load voltage"}) {
      auto run = whole;
      channel(run, name).value[place] *= 1.0 + 1e-12;
      CAPTURE(name);
      CHECK(wrong(run) == 1);
    }
  }
  SECTION("a reply to the query before") {
    auto run = whole;
    auto& readings = channel(run, "output power");
    std::swap(readings.reply[place], readings.reply[place + 1]);
    CHECK(wrong(run) == 2);
  }
  SECTION("a reply that nobody sent then") {
    auto run = whole;
    for (auto& entry : run.log) {
      if (entry.instrument == kShuntMeter) entry.sent_wall_ns -= 1'000'000'000;
    }
    CHECK(wrong(run) > 100);
  }
  SECTION("a typed value that no display showed") {
    auto run = whole;
    run.stored.typed.front().value += 0.1;
    CHECK(wrong(run) == 1);
  }
  SECTION("a fault that nothing tells of") {
    auto run = whole;
    for (auto& one : run.stored.channels) {
      for (auto& flags : one.flags) {
        if ((flags & instrument::kMissing) != 0U) flags = instrument::kStale;
      }
    }
    CHECK(join_replies(run, hookup).hidden.empty());  // the event is still there
    std::erase_if(run.stored.events, [](const auto& event) { return event.source == kWattmeter; });
    CHECK(join_replies(run, hookup).hidden.size() == join_replies(run, hookup).faults);
  }
  SECTION("a good reading that was made of garbage") {
    auto run = whole;
    for (auto& entry : run.log) {
      if (entry.instrument == kThermometer && entry.number == 60) entry.fault = "garbage";
    }
    const auto hidden = join_replies(run, hookup).hidden;
    REQUIRE_FALSE(hidden.empty());
    CHECK(hidden.front().instrument == kThermometer);
  }
}

}  // namespace
}  // namespace loadstair::whole
