// The stair, phase by phase.
#include <algorithm>
#include <exception>
#include <memory>
#include <utility>

#include "analysis/base/number.h"
#include "daemon/sequencer/state.h"

namespace loadstair::sequencer {
namespace {

using boost::asio::awaitable;

constexpr std::int64_t kReadyLook = 50'000'000;

store::StepState state_of(Go how) {
  switch (how) {
    case Go::next:
      return store::StepState::skipped;
    case Go::stop:
      return store::StepState::stopped;
    default:
      return store::StepState::done;
  }
}

}  // namespace

void Sequencer::State::enter(StepPhase new_phase, std::string what, std::optional<std::int64_t> until) {
  step_phase = new_phase;
  waits_for = std::move(what);
  until_ns = until;
  changed();
}

void Sequencer::State::post_step(store::StepState state) {
  step.state = state;
  bench.writer().post(step);
}

/// The condition is to be named before the co_await: g++ 12 destroys a closure that is built inside a
/// co_await expression twice.
awaitable<Go> Sequencer::State::wait_for(std::function<bool()> condition, std::int64_t deadline_ns) {
  while (true) {
    if (stop_demand) co_return Go::stop;
    if (skip_demand) co_return Go::next;
    if (hold_demand) co_return co_await hold();
    if (condition && condition()) co_return Go::on;
    if (clock.now_ns() >= deadline_ns) co_return Go::on;
    co_await wake.wait_until(deadline_ns);
  }
}

awaitable<Go> Sequencer::State::wait_until(std::int64_t deadline_ns) {
  return wait_for({}, deadline_ns);
}

awaitable<Go> Sequencer::State::hold() {
  phase = RunPhase::holding;
  bench.accept_captures(std::nullopt);
  reason = hold_demand.value_or("");
  prompt.reset();
  enter(StepPhase::hold,
        "held, and the power stays on: " + reason + ". Resume, go to the next step, or stop.");
  event("hold", "sequencer", "the run is held, the power stays on: " + reason);
  while (!stop_demand && !skip_demand && !resume_demand) co_await wake.wait_until(INT64_MAX);
  hold_demand.reset();
  if (stop_demand) co_return Go::stop;
  phase = RunPhase::running;
  reason.clear();
  rearm_tripped();
  if (skip_demand) co_return Go::next;
  resume_demand = false;
  event("resume", "sequencer", "resumed; the step begins again with its soak");
  co_return Go::again;
}

awaitable<void> Sequencer::State::run_stair() {
  const auto self = shared_from_this();
  Go how = Go::stop;
  std::string broke;
  try {
    how = co_await all_steps();
  } catch (const std::exception& error) {
    broke = error.what();
  } catch (...) {
    broke = "an exception of an unknown kind";
  }
  if (!broke.empty()) {
    tell_broken("the run was ended by a fault of the program: " + broke);
    stop_now("a fault of the program: " + broke);
  }
  if (step_index >= 0 && !step.ended_ns) end_step(Go::stop);
  const auto end = how == Go::stop ? store::RunState::stopped : store::RunState::done;
  co_await finish(end);
}

awaitable<Go> Sequencer::State::all_steps() {
  if (const auto go = co_await prepare(); go != Go::on) co_return Go::stop;
  for (std::int32_t index = 0; index < static_cast<std::int32_t>(stair.steps.size()); ++index) {
    const auto go = co_await run_step(index);
    end_step(go);
    if (go == Go::stop) co_return Go::stop;
  }
  co_return Go::on;
}

awaitable<Go> Sequencer::State::wait_for_instruments() {
  const auto& hookup = bench.hookup();
  const auto deadline = clock.now_ns() + ticks_of(options.ready_limit_s);
  while (true) {
    std::string missing;
    for (const auto& now : bench.instruments()) {
      const auto* declared = hookup.find_instrument(now.name);
      if (declared == nullptr || declared->link.kind == setup::LinkKind::folder || now.ready) continue;
      missing += (missing.empty() ? "" : ", ") + now.name + " (" + now.state + ")";
    }
    if (missing.empty()) co_return Go::on;
    if (clock.now_ns() >= deadline) {
      stop_now("not ready: " + missing + "; check power, cable and the hook-up file, then start again");
      co_return Go::stop;
    }
    enter(StepPhase::start, "waits for " + missing, deadline);
    const auto go = co_await wait_until(std::min(deadline, clock.now_ns() + kReadyLook));
    if (go != Go::on) co_return go;
  }
}

/// Nothing is commanded before the run is on the disk: after a crash it is what tells that the bench may be
/// live.
awaitable<Go> Sequencer::State::put_on_disk() {
  enter(StepPhase::start, "waits until the run is on the disk");
  struct Flush {
    base::Outcome<void> outcome{base::Refusal{"record", "nothing was written"}};
    bool done = false;
  };
  const auto flush = std::make_shared<Flush>();
  bench.in_background([&writer = bench.writer(), flush] { flush->outcome = writer.flush(); },
                      [self = shared_from_this(), flush] {
                        flush->done = true;
                        self->wake.notify();
                      });
  const std::function<bool()> done = [flush] { return flush->done; };
  const auto go = co_await wait_for(done, INT64_MAX);
  if (go != Go::on) co_return go;
  if (!flush->outcome) {
    stop_now("the run cannot be recorded, so nothing was switched on: " + flush->outcome.refusal().text());
    co_return Go::stop;
  }
  co_return Go::on;
}

/// Everything that comes before the first step; power comes with the steps.
awaitable<Go> Sequencer::State::prepare() {
  if (const auto go = co_await wait_for_instruments(); go != Go::on) co_return go;
  co_return co_await put_on_disk();
}

awaitable<Go> Sequencer::State::apply_all(const std::vector<setup::SetPoint>& points, std::int32_t for_step) {
  for (const auto& point : points) {
    if (const auto go = co_await wait_until(0); go != Go::on) co_return go;
    blank_guards();
    base::Outcome<std::optional<double>> outcome{std::optional<double>{}};
    {
      const Commanding under_way{commanding};
      outcome = co_await bench.apply(point.control, point.setting, point.value);
    }
    blank_guards();
    store::SettingItem item;
    item.run = run;
    item.step = for_step;
    item.control = point.control;
    item.setting = point.setting;
    item.value = point.value;
    if (outcome) item.read_back = *outcome;
    item.t_ns = clock.now_ns();
    bench.writer().post(item);
    if (stop_demand) co_return Go::stop;
    if (!outcome) {
      event("command_refused", point.control, outcome.refusal().text());
      stop_now("cannot set " + point.control + " " + point.setting + ": " + outcome.refusal().text());
      co_return Go::stop;
    }
  }
  co_return Go::on;
}

awaitable<Go> Sequencer::State::run_step(std::int32_t index) {
  const auto& plan = stair.steps[static_cast<std::size_t>(index)];
  step_index = index;
  step = {};
  step.run = run;
  step.step = index;
  step.begun_ns = clock.now_ns();
  typed.clear();
  doubted.clear();
  bench.set_step(index);
  rearm_tripped();
  post_step(store::StepState::waiting);
  owe_rewire(plan);
  Go go = Go::again;
  while (go == Go::again) {
    go = co_await bring_up(plan);
    if (go == Go::on) {
      enter(StepPhase::apply, "sets and reads back the step's set points");
      go = co_await apply_all(plan.set, index);
    }
    if (go == Go::on) {
      applied_ns = clock.now_ns();
      go = co_await hand_prompt(plan);
    }
  }
  if (go != Go::on) co_return go;
  output_is_up(plan);
  do {
    go = co_await measure(plan);
  } while (go == Go::again);
  co_return go;
}

/// From the soak to the capture; begins again after a hold, with windows of its own.
awaitable<Go> Sequencer::State::measure(const setup::Step& plan) {
  bench.accept_captures(std::nullopt);
  step.soak_begin_ns.reset();
  step.settle_begin_ns.reset();
  step.average_begin_ns.reset();
  step.average_end_ns.reset();
  step.settled_ns.reset();
  step.settled_how.clear();
  if (const auto go = co_await soak(plan); go != Go::on) co_return go;
  if (const auto go = co_await settle(plan); go != Go::on) co_return go;
  if (const auto go = co_await average(plan); go != Go::on) co_return go;
  co_return co_await capture(plan);
}

awaitable<Go> Sequencer::State::soak(const setup::Step& plan) {
  const auto begin = clock.now_ns();
  step.soak_begin_ns = begin;
  post_step(store::StepState::soaking);
  const auto end = begin + ticks_of(plan.soak_s);
  enter(StepPhase::soak, "soaks", end);
  co_return co_await wait_until(end);
}

awaitable<Go> Sequencer::State::average(const setup::Step& plan) {
  const auto begin = clock.now_ns();
  step.average_begin_ns = begin;
  bench.accept_captures(applied_ns);
  post_step(store::StepState::averaging);
  const auto least = ticks_of(plan.average_s);
  enter(StepPhase::average, "averages", begin + least);
  auto go = Go::on;
  if (!typed_channels(plan).empty()) go = co_await typed_rounds(plan, begin, least);
  if (go == Go::on) {
    enter(StepPhase::average, "averages", begin + least);
    go = co_await wait_until(begin + least);
  }
  if (go == Go::on) step.average_end_ns = clock.now_ns();
  co_return go;
}

awaitable<Go> Sequencer::State::capture(const setup::Step& plan) {
  if (!plan.capture) co_return Go::on;
  post_step(store::StepState::capturing);
  if (bench.hookup().captures.empty()) {
    event("capture missing", plan.label,
          "the step wants a capture, but the hook-up file declares no capture source");
    co_return Go::on;
  }
  const auto had = bench.captures_of_step(step_index);
  const auto deadline = clock.now_ns() + ticks_of(options.capture_limit_s);
  enter(StepPhase::capture,
        options.request_capture ? "waits for the scope's file" : "waits for a capture: save one on the scope",
        deadline);
  if (options.request_capture) options.request_capture(plan.label);
  const std::function<bool()> came = [this, had] { return bench.captures_of_step(step_index) > had; };
  const auto go = co_await wait_for(came, deadline);
  if (go == Go::on && bench.captures_of_step(step_index) == had) {
    event("capture missing", plan.label,
          "no capture came within " + brief(options.capture_limit_s) + " s; the step has none");
  }
  co_return go;
}

void Sequencer::State::end_step(Go how) {
  if (step.ended_ns) return;
  bench.accept_captures(std::nullopt);
  step.ended_ns = clock.now_ns();
  if (how == Go::next) step.reason = skip_demand.value_or("");
  if (how == Go::stop) step.reason = stop_demand.value_or("");
  if (how == Go::next) event("skipped", stair.steps[static_cast<std::size_t>(step_index)].label, step.reason);
  post_step(state_of(how));
  skip_demand.reset();
  hold_demand.reset();
  resume_demand = false;
  prompt.reset();
  changed();
}

}  // namespace loadstair::sequencer
