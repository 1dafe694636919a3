// What is watched while a run goes on: the guards, and whether the record can be written.
#include <utility>

#include "analysis/base/number.h"
#include "daemon/sequencer/state.h"

namespace loadstair::sequencer {

namespace {

constexpr std::int64_t kLook = 100'000'000;
constexpr std::int64_t kLate = 150'000'000;

}  // namespace

boost::asio::awaitable<void> Sequencer::State::watch() {
  const auto self = shared_from_this();
  const auto mine = run;
  bool let_pass = false;
  while (run_task && run == mine) {
    const auto due = clock.now_ns() + kLook;
    co_await clock.sleep_until(due);
    // When this thread itself was held up, the readings of that time wait behind this timer: they come first,
    // once.
    let_pass = !let_pass && clock.now_ns() - due > kLate;
    if (let_pass) continue;
    for (auto& guarded : guards) check_guard(guarded);
    if (!stop_demand && phase != RunPhase::making_safe) {
      if (const auto health = bench.writer().health(); health.failure) {
        stop_now("the record cannot be written: " + health.failure->text);
      }
    }
  }
}

void Sequencer::State::arm_guards() {
  guards_armed = true;
  const auto now = clock.now_ns();
  for (auto& guarded : guards) {
    guarded.watch.arm(now);
    guarded.watch.blank(now);
  }
}

void Sequencer::State::rearm_tripped() {
  const auto now = clock.now_ns();
  for (auto& guarded : guards) {
    if (guarded.watch.standing(now) == GuardWatch::Standing::tripped) guarded.watch.arm(now);
  }
}

void Sequencer::State::disarm_guards() {
  guards_armed = false;
  for (auto& guarded : guards) guarded.watch.disarm();
}

void Sequencer::State::blank_guards() {
  const auto now = clock.now_ns();
  for (auto& guarded : guards) guarded.watch.blank(now);
}

void Sequencer::State::watch_lower_limits(bool watched) {
  for (auto& guarded : guards) guarded.watch.watch_lower_limit(watched);
}

void Sequencer::State::check_guard(Guarded& guarded) {
  if (!run_task || stop_demand || phase == RunPhase::making_safe) return;
  if (const auto cause = guarded.watch.check(clock.now_ns())) trip(guarded.watch, *cause);
}

void Sequencer::State::trip(const GuardWatch& guard, const GuardWatch::Cause& cause) {
  const auto& name = guard.guard().name;
  trips.push_back({clock.now_ns(), name, cause.text, std::string{name_of(cause.demand)}});
  const auto why = "guard \"" + name + "\": " + cause.text;
  switch (cause.demand) {
    case GuardDemand::stop:
      stop_now(why);
      break;
    case GuardDemand::hold:
      if (!hold_demand) hold_demand = why;
      break;
    case GuardDemand::next:
      if (!skip_demand) skip_demand = why;
      break;
  }
  // After the demand: the safe state does not wait for the words.
  event("guard", name, cause.text + "; action: " + std::string{name_of(cause.demand)});
  wake.notify();
}

}  // namespace loadstair::sequencer
