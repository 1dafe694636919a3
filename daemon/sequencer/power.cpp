// What is on during a step: brought up, switched off, and dead while the wiring is changed.
#include <algorithm>
#include <utility>

#include "analysis/base/number.h"
#include "daemon/sequencer/state.h"

namespace loadstair::sequencer {
namespace {

using boost::asio::awaitable;

/// The order in which a bench is switched on: what feeds first.
int switch_on_rank(const std::string& role) {
  if (role == "source") return 0;
  if (role == "converter") return 1;
  return 2;
}

bool has(const std::vector<std::string>& names, const std::string& name) {
  return std::find(names.begin(), names.end(), name) != names.end();
}

/// With the output dead, a lower limit would trip on what is meant to be.
bool output_is_dead(const setup::Step& plan) {
  return plan.kind == setup::StepKind::zero || plan.kind == setup::StepKind::tie ||
         plan.kind == setup::StepKind::standby;
}

bool confirmable(const setup::Hookup& hookup, const setup::Control& control) {
  const auto* instrument = hookup.find_instrument(control.instrument);
  return instrument != nullptr && instrument->profile.safe &&
         !instrument->profile.safe->confirm_query.empty();
}

/// What is said beside the cautions of everything that is done by hand.
std::vector<std::string> rewire_cautions(const setup::Hookup& hookup) {
  std::vector<std::string> cautions;
  cautions.emplace_back(
      "The wiring is changed only dead: isolate, prove dead with a tester, then change it. Power may come on "
      "as "
      "soon as you say that it is done: look over every connection and step back first.");
  const bool source_switched = std::any_of(hookup.controls.begin(), hookup.controls.end(),
                                           [](const auto& control) { return control.role == "source"; });
  if (!source_switched) {
    cautions.emplace_back(
        "No instrument of this bench switches its source: switch the source off by hand before anything is "
        "touched.");
  }
  const auto general = hand_cautions(hookup);
  cautions.insert(cautions.end(), general.begin(), general.end());
  return cautions;
}

}  // namespace

/// A step that needs something switched off is refused before anything is on, where nothing could tell that
/// it is off.
base::Outcome<void> Sequencer::State::may_switch_off(const setup::Stair& wanted) const {
  const auto& hookup = bench.hookup();
  for (const auto& plan : wanted.steps) {
    const auto on_now = setup::controls_on(plan, hookup);
    for (const auto& control : hookup.controls) {
      if ((plan.rewire.empty() && has(on_now, control.name)) || confirmable(hookup, control)) continue;
      return base::Refusal{wanted.file,
                           "the step \"" + plan.label + "\" needs " + control.name +
                               " switched off, but its profile has no query that confirms it; add \"safe\" "
                               "with a \"confirm\" query to the profile, or take the check out"};
    }
  }
  return {};
}

/// Brings the bench from whatever is on to what the step wants on: first everything off where the wiring is
/// changed, then off what is not wanted; then the settings of what comes on, read back, then power. Safe to
/// be called again when the step begins again.
awaitable<Go> Sequencer::State::bring_up(const setup::Step& plan) {
  const auto wanted = setup::controls_on(plan, bench.hookup());
  const bool dead = output_is_dead(plan);
  const bool rewiring = !owed_rewire.empty();
  const bool switches =
      rewiring || wanted.size() != on.size() ||
      !std::all_of(wanted.begin(), wanted.end(), [this](auto& name) { return has(on, name); });
  if (switches || dead) watch_lower_limits(false);
  if (rewiring) {
    if (const auto go = co_await rewire(); go != Go::on) co_return go;
  }
  if (const auto go = co_await switch_off_all_but(wanted); go != Go::on) co_return go;
  if (const auto go = co_await switch_on_all(wanted, plan); go != Go::on) co_return go;
  if (!guards_armed) {
    arm_guards();
  } else if (switches) {
    blank_guards();
  }
  // Where it was dead, a prompt of this step may be what brings it alive: then not before the prompt is
  // answered.
  if (dead || !output_was_dead || plan.prompt.empty()) watch_lower_limits(!dead);
  co_return Go::on;
}

/// Set points and hands have done their part: the output is as the step wants it.
void Sequencer::State::output_is_up(const setup::Step& plan) {
  output_was_dead = output_is_dead(plan);
  watch_lower_limits(!output_was_dead);
}

/// The set points of what is still off are there before its power is: a load that holds an earlier one would
/// be switched on with it.
awaitable<Go> Sequencer::State::switch_on_all(const std::vector<std::string>& wanted,
                                              const setup::Step& plan) {
  auto controls = bench.hookup().controls;
  std::erase_if(controls,
                [&](const auto& control) { return !has(wanted, control.name) || has(on, control.name); });
  if (controls.empty()) co_return Go::on;
  std::vector<setup::SetPoint> points;
  std::vector<std::string> names;
  for (const auto& control : controls) {
    names.push_back(control.name);
    for (const auto& [setting, value] : control.at_start) points.push_back({control.name, setting, value});
  }
  std::copy_if(plan.set.begin(), plan.set.end(), std::back_inserter(points),
               [&names](const auto& point) { return has(names, point.control); });
  enter(StepPhase::start, "sets and reads back what is to hold before the power comes on");
  // What is set before the first step belongs to the start.
  const std::int32_t of_step = step_index == 0 ? -1 : step_index;
  if (const auto go = co_await apply_all(points, of_step); go != Go::on) co_return go;
  std::stable_sort(controls.begin(), controls.end(), [](const auto& a, const auto& b) {
    return switch_on_rank(a.role) < switch_on_rank(b.role);
  });
  for (const auto& control : controls) {
    if (stop_demand) co_return Go::stop;
    enter(StepPhase::start, "switches on: " + control.name);
    energised = true;
    on.push_back(control.name);
    base::Outcome<void> outcome;
    {
      const Commanding under_way{commanding};
      outcome = co_await bench.switch_on(control.name);
    }
    if (stop_demand) co_return Go::stop;
    if (!outcome) {
      event("command_refused", control.name, outcome.refusal().text());
      stop_now("cannot switch on " + control.name + ": " + outcome.refusal().text());
      co_return Go::stop;
    }
  }
  co_return Go::on;
}

awaitable<Go> Sequencer::State::switch_off_all_but(const std::vector<std::string>& wanted) {
  std::vector<std::string> unwanted;
  for (const auto& control : in_safe_order(bench.hookup())) {
    if (!has(wanted, control.name) && has(on, control.name)) unwanted.push_back(control.name);
  }
  co_return co_await switch_off(unwanted);
}

/// Each confirmed before the next; what is not confirmed ends the run in its safe state.
awaitable<Go> Sequencer::State::switch_off(const std::vector<std::string>& controls) {
  for (const auto& control : controls) {
    if (stop_demand) co_return Go::stop;
    enter(StepPhase::start, "switches off: " + control);
    const auto outcome = co_await bench.make_safe(control);
    if (stop_demand) co_return Go::stop;
    if (!outcome || *outcome != recorder::SafeHow::confirmed) {
      const auto why = outcome ? std::string{"it cannot be read back"} : outcome.refusal().text();
      event("not switched off", control, control + " is not confirmed to be off: " + why);
      stop_now("cannot switch off " + control + ": " + why);
      co_return Go::stop;
    }
    std::erase(on, control);
    event("switched off", control, control + " is off, read back");
  }
  co_return Go::on;
}

/// Everything off and read back, whatever is believed of it; the discharge; then the person. The guards rest:
/// there is nothing left that they could switch off, and meters in a person's hands show anything.
awaitable<Go> Sequencer::State::rewire() {
  disarm_guards();
  std::vector<std::string> controls;
  for (const auto& control : in_safe_order(bench.hookup())) controls.push_back(control.name);
  if (const auto go = co_await switch_off(controls); go != Go::on) co_return go;
  if (stair.end.discharge_s > 0.0) {
    const auto text = "discharges for " + brief(stair.end.discharge_s) + " s before the wiring is changed";
    event("discharge", "sequencer", text);
    const auto until = clock.now_ns() + ticks_of(stair.end.discharge_s);
    enter(StepPhase::safe_state, text, until);
    if (const auto go = co_await wait_until(until); go != Go::on) co_return go;
  }
  const auto text = owed_rewire;
  const auto go = co_await ask_hand(text, rewire_cautions(bench.hookup()));
  if (go == Go::on) owed_rewire.clear();
  co_return go;
}

/// A change that nobody said was done is asked again before the next power: the wiring of a step that was
/// left at its prompt may be neither the old nor the new one.
void Sequencer::State::owe_rewire(const setup::Step& plan) {
  if (plan.rewire.empty()) return;
  if (owed_rewire.empty()) {
    owed_rewire = plan.rewire;
  } else {
    owed_rewire = "Now: " + plan.rewire + " (Asked before and not confirmed: " + owed_rewire + ")";
  }
}

}  // namespace loadstair::sequencer
