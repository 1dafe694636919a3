#include "daemon/sequencer/sequencer.h"

#include <algorithm>
#include <boost/asio/post.hpp>
#include <set>
#include <utility>

#include "analysis/base/number.h"
#include "daemon/evaluation/evaluate.h"
#include "daemon/sequencer/state.h"

namespace loadstair::sequencer {
namespace {

using base::Outcome;
using base::Refusal;

/// How often a channel's readings come, as declared.
double period_of(const setup::Hookup& hookup, const setup::Channel& channel) {
  const auto* instrument = hookup.find_instrument(channel.instrument);
  if (instrument == nullptr) return 1.0;
  const bool unsolicited = instrument->profile.dialect == instrument::Dialect::text_lines;
  return unsolicited && instrument->update_s > 0.0 ? instrument->update_s : instrument->poll_s;
}

store::RunStart run_start_of(const setup::Hookup& hookup, const setup::Stair& stair,
                             const SequencerOptions& options, const link::Clock& clock) {
  store::RunStart start;
  start.prototype = stair.prototype.name;
  start.revision = stair.prototype.revision;
  start.unit = stair.prototype.unit;
  start.started_ns = clock.now_ns();
  start.utc_offset_ns = clock.utc_offset_ns();
  start.zone = options.zone;
  start.seed = options.seed;
  start.program_version = options.program_version;
  start.method_version =
      options.method_version.empty() ? std::string{evaluation::kMethodVersion} : options.method_version;
  start.hookup_file = hookup.file;
  start.hookup_text = hookup.text;
  start.stair_file = stair.file;
  start.stair_text = stair.text;
  std::set<std::string> named;
  for (const auto& instrument : hookup.instruments) {
    if (named.insert(instrument.profile_name).second) {
      start.profiles.push_back({instrument.profile_name, instrument.profile.text});
    }
  }
  for (const auto& channel : hookup.channels) {
    store::ChannelEntry entry{channel.name, channel.typed ? "" : channel.instrument, channel.value,
                              meter_unit(channel)};
    if (const auto* instrument = hookup.find_instrument(channel.instrument); instrument && !channel.typed) {
      for (const auto& value : instrument->profile.values) {
        if (value.name == channel.value) entry.unit = value.unit;
      }
    }
    start.channels.push_back(std::move(entry));
  }
  for (const auto& step : stair.steps) start.steps.push_back({step.label, step.load_w});
  return start;
}

}  // namespace

Sequencer::State::State(recorder::Bench& the_bench, SequencerOptions the_options)
    : bench{the_bench},
      clock{the_bench.clock()},
      options{std::move(the_options)},
      tasks{the_bench.executor(),
            [this](std::exception_ptr failure) {
              tell_broken("the program broke a promise of its own: " + recorder::said(failure));
              stop_now("the program broke a promise of its own");
            }},
      safe_tasks{the_bench.executor(),
                 [this](std::exception_ptr failure) {
                   tell_broken("while making the bench safe: " + recorder::said(failure));
                 }},
      wake{the_bench.clock(), the_bench.executor()},
      one_safe{the_bench.clock(), the_bench.executor()},
      safe_done{the_bench.clock(), the_bench.executor()} {}

bool Sequencer::State::busy() const {
  return run_task || crash_task || making_safe;
}

void Sequencer::State::changed() {
  ++changes;
  if (change_posted || !change_callback) return;
  change_posted = true;
  boost::asio::post(bench.executor(), [weak = weak_from_this()] {
    const auto self = weak.lock();
    if (!self) return;
    self->change_posted = false;
    if (self->change_callback) self->change_callback();
  });
}

void Sequencer::State::event(std::string kind, std::string source, std::string text) {
  bench.event(std::move(kind), std::move(source), std::move(text), run_task ? run : event_run);
  changed();
}

/// Where a fault is told, a listener that throws again must not make another one of it.
void Sequencer::State::tell_broken(const std::string& text) {
  try {
    event("broken", "sequencer", text);
  } catch (...) {
    changed();
  }
}

void Sequencer::State::listen() {
  listeners.push_back(bench.on_reading([this](const recorder::ChannelUpdate& update) {
    for (auto& guarded : guards) {
      if (guarded.channel != update.channel) continue;
      guarded.watch.see(update.point);
      check_guard(guarded);
    }
  }));
  listeners.push_back(bench.on_capture([this](const recorder::CaptureArrived&) { wake.notify(); }));
  listeners.push_back(bench.on_event([this](const recorder::BenchEvent& happened) {
    if (happened.kind == recorder::kInstrumentFailed) stop_now(happened.source + ": " + happened.text);
    changed();
  }));
}

void Sequencer::State::stop_listening() {
  for (const auto listener : listeners) bench.forget(listener);
  listeners.clear();
}

Outcome<store::RunId> Sequencer::State::start(setup::Stair new_stair) {
  if (closing) return Refusal{"", "the daemon is closing; start it again first"};
  if (run_task) {
    return Refusal{"", "run " + base::print_integer(run) + " is going on; wait for its end or stop it first"};
  }
  if (busy()) return Refusal{"", "the bench is being made safe; try again when that is done"};
  for (const auto& one : safe) {
    if (one.open()) {
      return Refusal{one.control,
                     "its safe state is not confirmed yet (" + one.failure +
                         "); switch it off by hand, and connect it again: the safe state is then "
                         "sent and read back by itself"};
    }
  }
  if (new_stair.steps.empty()) return Refusal{new_stair.file, "the stair has no steps"};
  if (auto fits = setup::match(new_stair, bench.hookup()); !fits) return fits.refusal();
  if (auto possible = may_switch_off(new_stair); !possible) return possible.refusal();
  if (const auto health = bench.writer().health(); health.failure) {
    return Refusal{"", "the record cannot be written: " + health.failure->text};
  }
  stair = std::move(new_stair);
  auto begin = run_start_of(bench.hookup(), stair, options, clock);
  const auto offset = begin.utc_offset_ns;
  run = bench.writer().begin_run(std::move(begin));
  event_run = run;
  owing.push_back(run);
  bench.begin_run({run, offset});
  phase = RunPhase::running;
  step_phase = StepPhase::start;
  step_index = -1;
  step = {};
  reason.clear();
  warnings.clear();
  trips.clear();
  typed.clear();
  last_typed.clear();
  doubted.clear();
  prompt.reset();
  safe.clear();
  stop_demand.reset();
  skip_demand.reset();
  hold_demand.reset();
  resume_demand = false;
  energised = false;
  on.clear();
  owed_rewire.clear();
  guards.clear();
  guards_armed = false;
  output_was_dead = false;
  for (const auto& guard : stair.guards) {
    const auto channel = bench.find_channel(guard.channel);
    if (!channel) continue;  // match() refuses such a stair
    const auto& declared = bench.hookup().channels[*channel];
    guards.push_back({GuardWatch{guard, declared.unit, period_of(bench.hookup(), declared)}, *channel});
  }
  run_task = true;
  listen();
  tasks.spawn(run_stair());
  tasks.spawn(watch());
  changed();
  return run;
}

Outcome<void> Sequencer::State::stop(std::string why) {
  if (!run_task) return Refusal{"", "no run is going on"};
  if (stop_demand) return Refusal{"", "the run is being stopped already: " + *stop_demand};
  if (phase == RunPhase::making_safe) return Refusal{"", "the run has ended; the bench is being made safe"};
  stop_now(std::move(why));
  return {};
}

/// The first reason counts. The safe state begins at once, whatever the run's coroutine waits for just now.
void Sequencer::State::stop_now(std::string why) {
  if (!run_task || stop_demand || phase == RunPhase::making_safe) return;
  stop_demand = why;
  reason = std::move(why);
  phase = RunPhase::making_safe;
  prompt.reset();
  disarm_guards();
  begin_safe_state();
  event("stop", "sequencer", reason);
  wake.notify();
}

Sequencer::Sequencer(recorder::Bench& bench, SequencerOptions options)
    : state_{std::make_shared<State>(bench, std::move(options))} {}

Sequencer::~Sequencer() {
  state_->stop_listening();
  state_->change_callback = nullptr;
}

Outcome<store::RunId> Sequencer::start(setup::Stair stair) {
  return state_->start(std::move(stair));
}

Outcome<void> Sequencer::stop(std::string reason) {
  return state_->stop(std::move(reason));
}

Outcome<void> Sequencer::answer(std::int64_t prompt, std::string by) {
  return state_->answer(prompt, std::move(by));
}

Outcome<void> Sequencer::refuse(std::int64_t prompt, std::string reason) {
  return state_->refuse(prompt, std::move(reason));
}

Outcome<void> Sequencer::enter_typed(std::int64_t prompt, TypedEntry entry, std::string by) {
  return state_->enter_typed(prompt, entry, by);
}

Outcome<void> Sequencer::resume() {
  if (!state_->hold_demand || state_->stop_demand) return Refusal{"", "nothing is held"};
  state_->resume_demand = true;
  state_->wake.notify();
  return {};
}

Outcome<void> Sequencer::skip(std::string reason) {
  if (!state_->run_task || state_->stop_demand || state_->phase == RunPhase::making_safe ||
      state_->step_index < 0) {
    return Refusal{"", "no step is going on"};
  }
  if (state_->skip_demand) return Refusal{"", "the step is being left already: " + *state_->skip_demand};
  state_->skip_demand = std::move(reason);
  state_->wake.notify();
  return {};
}

Snapshot Sequencer::snapshot() const {
  return state_->snapshot();
}

std::uint64_t Sequencer::change() const {
  return state_->changes;
}

void Sequencer::on_change(std::function<void()> callback) {
  state_->change_callback = std::move(callback);
}

bool Sequencer::busy() const {
  return state_->busy();
}

boost::asio::awaitable<void> Sequencer::idle() {
  const auto state = state_;
  while (state->busy()) co_await state->clock.sleep_for(std::chrono::milliseconds{20});
}

boost::asio::awaitable<void> Sequencer::close(std::string reason) {
  const auto state = state_;
  state->closing = true;
  state->stop_now(std::move(reason));
  state->wake.notify();
  while (state->busy()) co_await state->clock.sleep_for(std::chrono::milliseconds{5});
  co_await state->tasks.close();
  co_await state->safe_tasks.close();
  state->stop_listening();
}

}  // namespace loadstair::sequencer
