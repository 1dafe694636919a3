// What is shown of a run.
#include <algorithm>

#include "daemon/sequencer/state.h"

namespace loadstair::sequencer {

std::string_view name_of(RunPhase phase) {
  switch (phase) {
    case RunPhase::idle:
      return "idle";
    case RunPhase::running:
      return "running";
    case RunPhase::holding:
      return "holding";
    case RunPhase::making_safe:
      return "making safe";
    case RunPhase::done:
      return "done";
    case RunPhase::stopped:
      return "stopped";
  }
  return "idle";
}

std::string_view name_of(StepPhase phase) {
  switch (phase) {
    case StepPhase::none:
      return "none";
    case StepPhase::start:
      return "start";
    case StepPhase::apply:
      return "apply";
    case StepPhase::prompt:
      return "prompt";
    case StepPhase::soak:
      return "soak";
    case StepPhase::settle:
      return "settle";
    case StepPhase::average:
      return "average";
    case StepPhase::typed:
      return "typed round";
    case StepPhase::capture:
      return "capture";
    case StepPhase::hold:
      return "hold";
    case StepPhase::safe_state:
      return "safe state";
  }
  return "none";
}

std::string_view name_of(PromptKind kind) {
  switch (kind) {
    case PromptKind::hand:
      return "hand";
    case PromptKind::typed:
      return "typed";
    case PromptKind::confirm:
      return "confirm";
  }
  return "hand";
}

Snapshot Sequencer::State::snapshot() const {
  const auto now = clock.now_ns();
  Snapshot shown;
  shown.change = changes;
  shown.run = run;
  shown.phase = phase;
  if (run != 0) {
    shown.prototype =
        stair.prototype.name + " revision " + stair.prototype.revision + ", unit " + stair.prototype.unit;
  }
  shown.step_phase = step_phase;
  shown.step = step_index;
  shown.steps = static_cast<std::int32_t>(stair.steps.size());
  if (step_index >= 0) shown.label = stair.steps[static_cast<std::size_t>(step_index)].label;
  shown.waits_for = waits_for;
  if (until_ns) shown.remaining_s = std::max(0.0, seconds_of(*until_ns - now));
  shown.prompt = prompt;
  for (const auto& one : typed) {
    shown.typed.push_back({one.prompt, bench.hookup().channels[one.channel].name, one.round, one.value.text,
                           one.value.value, one.value.unit, one.superseded});
  }
  for (const auto& guarded : guards) {
    const auto& watch = guarded.watch;
    GuardNow guard;
    guard.name = watch.guard().name;
    guard.channel = watch.guard().channel;
    guard.unit = watch.unit();
    guard.value = watch.value(now);
    guard.above = watch.guard().above;
    guard.below = watch.below();
    guard.margin = watch.margin(now);
    guard.state = name_of(watch.standing(now));
    guard.action = name_of(watch.demand());
    shown.guards.push_back(std::move(guard));
  }
  shown.trips = trips;
  shown.events = bench.recent_events();
  shown.reason = reason;
  shown.warnings = warnings;
  return shown;
}

}  // namespace loadstair::sequencer
