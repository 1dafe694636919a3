// Each fault of each kind of instrument against each guard action, on a whole bench in virtual time, with its
// expected end state; and after each: every good reading joined to what was sent, every fault found in the
// record, and no result that is both claimed and wrong. A stranger on the line after a reconnection is tested
// in tests/drivers/instrument and tests/daemon/sequencer.
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

struct Row {
  FaultKind kind;
  double length_s;
  Trip trip;
  std::vector<std::string> events;  ///< of the instrument, told during the run
  Limit limit = Limit::none;
  /// Under `next` the last step begins while the fault goes on, and is left as well.
  bool last_too = false;
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
  stair.steps = {stair.steps.at(2), stair.steps.at(4), stair.steps.at(5)};
  for (auto& step : stair.steps) {
    step.thermal.reset();
    REQUIRE(step.electrical);
    step.electrical->window_s = 1.5;
  }
  stair.guards.clear();
  return stair;
}

setup::Guard guard_of(const std::string& instrument, Action action) {
  setup::Guard guard;
  guard.name = "watch";
  guard.missing_after_s = 0.8;
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
  return {fault};
}

std::vector<StepState> expected_steps(const Row& row, Action action) {
  if (row.trip == Trip::none || action == Action::hold)
    return {StepState::done, StepState::done, StepState::done};
  if (action == Action::next)
    return {StepState::done, StepState::skipped, row.last_too ? StepState::skipped : StepState::done};
  if (action == Action::ignore && row.trip == Trip::missing)
    return {StepState::done, StepState::done, StepState::done};
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
    {"output power", {-1, 750}},     {"output frequency", {-0.1, 51}},
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
  const bool stops = row.trip == Trip::limit ? action == Action::stop || action == Action::ignore
                                             : row.trip == Trip::missing && action == Action::stop;
  const bool trips = row.trip == Trip::limit || (row.trip == Trip::missing && action != Action::ignore);
  // A load that is still away when the next step sets it ends the run: nothing is set that cannot be read
  // back.
  const bool unset = run.stored.end_reason.find("cannot set") != std::string::npos;
  if (unset) {
    CHECK(instrument == kLoad);
    CHECK(run.stored.summary.state == RunState::stopped);
    CHECK(run.source_off);
    return;
  }
  CHECK(run.stored.summary.state == (stops ? RunState::stopped : RunState::done));
  auto expected = expected_steps(row, action);
  // What is still missing when the next step begins skips that one too.
  if (trips && action == Action::next && run.stored.steps.back().state == StepState::skipped) {
    CHECK_THAT(run.stored.steps.back().reason, Catch::Contains("guard \"watch\""));
    expected.back() = StepState::skipped;
  }
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
    // What an instrument does once the run was stopped is told, but no longer belongs to the run.
    if (stops) break;
  }
  CHECK((kinds_of_events(run.stored, "watch").count("guard") == 1) == trips);
  const auto sequencer = kinds_of_events(run.stored, "sequencer");
  CHECK((sequencer.count("stop") == 1) == stops);
  CHECK((sequencer.count("hold") == 1) == (trips && action == Action::hold));
  CHECK((sequencer.count("resume") == 1) == (trips && action == Action::hold));
  if (stops) CHECK_THAT(run.stored.end_reason, Catch::Contains("guard \"watch\""));
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

void check_all(const std::string& instrument, const std::vector<Row>& rows) {
  const auto hookup = bench();
  const double at_s = middle_of_window(hookup);
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

TEST_CASE("faults of the SCPI wattmeter against each guard action") {
  check_all(kWattmeter, {
                            {FaultKind::silence, 1.5, Trip::missing, {"timeout", "resynchronised"}},
                            {FaultKind::late, 0.5, Trip::missing, {"timeout", "resynchronised"}},
                            {FaultKind::garbage, 1.5, Trip::missing, {"garbage", "lost", "connected"}},
                            {FaultKind::truncated, 1.5, Trip::missing, {"garbage", "lost", "connected"}},
                            {FaultKind::duplicate, 0.05, Trip::none, {"garbage", "resynchronised"}},
                            {FaultKind::overload, 1.5, Trip::limit, {"overload"}},
                            {FaultKind::vanish, 2.0, Trip::missing, {"lost", "connected"}},
                            {FaultKind::unit_change, 1.5, Trip::limit, {}, Limit::bare_number},
                        });
}

TEST_CASE("faults of the text-line shunt meter against each guard action") {
  check_all(kShuntMeter, {
                             {FaultKind::silence, 3.0, Trip::missing, {"timeout"}},
                             {FaultKind::late, 0.5, Trip::missing, {"timeout"}},
                             {FaultKind::garbage, 1.5, Trip::missing, {"garbage"}},
                             {FaultKind::truncated, 1.5, Trip::missing, {"garbage"}},
                             {FaultKind::duplicate, 1.5, Trip::none, {}, Limit::line_again},
                             {FaultKind::overload, 1.5, Trip::limit, {"overload"}},
                             {FaultKind::vanish, 2.0, Trip::missing, {"lost", "connected"}},
                             {FaultKind::unit_change, 1.5, Trip::missing, {"unit changed"}},
                         });
}

TEST_CASE("faults of the thermocouple reader against each guard action") {
  check_all(kThermometer, {
                              {FaultKind::silence, 3.0, Trip::missing, {"timeout"}},
                              {FaultKind::late, 0.5, Trip::missing, {"timeout"}},
                              {FaultKind::garbage, 1.5, Trip::missing, {"garbage"}},
                              {FaultKind::truncated, 1.5, Trip::missing, {"garbage"}},
                              {FaultKind::duplicate, 1.5, Trip::none, {}, Limit::line_again},
                              {FaultKind::overload, 1.5, Trip::limit, {"overload"}},
                              {FaultKind::vanish, 2.0, Trip::missing, {"lost", "connected"}},
                              {FaultKind::unit_change, 1.5, Trip::missing, {"unit changed"}},
                          });
}

TEST_CASE("faults of the SCPI load on TCP against each guard action") {
  check_all(kLoad, {
                       {FaultKind::silence, 1.5, Trip::missing, {"timeout", "resynchronised"}},
                       {FaultKind::late, 0.5, Trip::missing, {"timeout", "resynchronised"}},
                       {FaultKind::garbage, 1.5, Trip::missing, {"garbage", "lost", "connected"}},
                       {FaultKind::truncated, 1.5, Trip::missing, {"garbage", "lost", "connected"}},
                       {FaultKind::duplicate, 1.1, Trip::missing, {"garbage", "resynchronised"}},
                       {FaultKind::overload, 1.5, Trip::limit, {"overload"}},
                       {FaultKind::vanish, 2.0, Trip::missing, {"lost", "connected"}},
                       {FaultKind::unit_change, 1.5, Trip::limit, {}, Limit::bare_number},
                   });
}

}  // namespace
}  // namespace loadstair::whole
