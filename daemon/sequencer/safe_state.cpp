// The safe state: converter, then load, then source; confirmed by read-back, repeated, and loud where it is
// not.
#include <algorithm>
#include <utility>

#include "analysis/base/number.h"
#include "daemon/sequencer/state.h"

namespace loadstair::sequencer {
namespace {

using boost::asio::awaitable;

constexpr std::int64_t kHeadStart = 1'000'000'000;

int safe_rank(const std::string& role) {
  if (role == "converter") return 0;
  if (role == "load") return 1;
  if (role == "source") return 3;
  return 2;
}

constexpr const char* kProveDead =
    "prove dead with a tester before touching anything (prove the tester, test, prove the tester again), "
    "never by a "
    "screen";

}  // namespace

std::vector<setup::Control> in_safe_order(const setup::Hookup& hookup) {
  auto controls = hookup.controls;
  std::stable_sort(controls.begin(), controls.end(),
                   [](const auto& a, const auto& b) { return safe_rank(a.role) < safe_rank(b.role); });
  return controls;
}

/// Starts it beside whatever goes on; a second call while it is being made changes nothing.
void Sequencer::State::begin_safe_state() {
  if (making_safe) return;
  making_safe = true;
  command_since = commanding > 0;
  safe.clear();
  for (const auto& control : in_safe_order(bench.hookup())) {
    Safe one;
    one.control = control.name;
    one.instrument = control.instrument;
    const auto* declared = bench.hookup().find_instrument(control.instrument);
    one.possible = declared != nullptr && declared->profile.safe.has_value();
    one.confirmable = one.possible && !declared->profile.safe->confirm_query.empty();
    safe.push_back(std::move(one));
  }
  safe_tasks.spawn(make_all_safe());
}

/// Whatever breaks in it, it comes to its end and says what is not confirmed.
awaitable<void> Sequencer::State::make_all_safe() {
  const auto self = shared_from_this();
  warnings.clear();
  std::string broke;
  try {
    co_await try_all_safe();
    tell_unconfirmed();
  } catch (const std::exception& error) {
    broke = error.what();
  } catch (...) {
    broke = "an exception of an unknown kind";
  }
  making_safe = false;
  safe_done.notify();
  if (!broke.empty()) tell_broken("while making the bench safe: " + broke);
  changed();
}

/// One control after the other; one that does not answer gets a head start only, so that it cannot keep the
/// source on. Each goes on trying beside the others until its own limit.
awaitable<void> Sequencer::State::try_all_safe() {
  for (std::size_t place = 0; place < safe.size(); ++place) {
    if (!safe[place].possible) continue;
    safe[place].tried = false;
    safe_tasks.spawn(make_one_safe(place));
    const auto head_start = clock.now_ns() + kHeadStart;
    while (!safe[place].tried && clock.now_ns() < head_start) co_await one_safe.wait_until(head_start);
  }
  const auto at_work = [](const Safe& one) { return one.possible && !one.tried; };
  while (std::any_of(safe.begin(), safe.end(), at_work)) co_await one_safe.wait_until(INT64_MAX);
}

/// The instrument sends it at once, reads it back and repeats it, and only where its identity is as declared.
awaitable<void> Sequencer::State::make_one_safe(std::size_t place) {
  const auto self = shared_from_this();
  const auto control = safe[place].control;
  std::string failure;
  auto how = recorder::SafeHow::sent;
  try {
    const auto outcome = co_await bench.make_safe(control);
    if (outcome) {
      how = *outcome;
    } else {
      failure = outcome.refusal().text();
    }
  } catch (const std::exception& error) {
    failure = error.what();
  } catch (...) {
    failure = "an exception of an unknown kind";
  }
  if (place >= safe.size() || safe[place].control != control) co_return;  // a list of another safe state
  safe[place].sent = failure.empty();
  safe[place].confirmed = failure.empty() && how == recorder::SafeHow::confirmed;
  safe[place].failure = failure;
  safe[place].tried = true;
  one_safe.notify();
  if (!safe[place].confirmed) co_return;
  try {
    event("safe state", control, control + " is in its safe state, read back");
  } catch (const std::exception& error) {
    tell_broken("while " + control + " was said to be safe: " + error.what());
  }
}

/// What a person has to do about a control; empty: it is safe, read back.
std::string Sequencer::State::warning_of(const Safe& one) {
  if (one.confirmed) return {};
  if (!one.possible) {
    return "NOTHING IN ITS PROFILE MAKES " + one.control + " SAFE. Switch it off by hand, and " + kProveDead +
           ".";
  }
  if (!one.open()) {
    return "THE SAFE STATE OF " + one.control +
           " WAS SENT AND CANNOT BE CONFIRMED: its profile has no query for it. Look at it, and " +
           kProveDead + ".";
  }
  return "THE SAFE STATE OF " + one.control + " IS NOT CONFIRMED (" + one.failure +
         "). Use the hardware emergency stop or switch it off by hand, and " + kProveDead + ".";
}

void Sequencer::State::tell_unconfirmed() {
  // The watch first: it does not depend on anybody who hears of it.
  const bool to_wait_for = std::any_of(safe.begin(), safe.end(), [](const Safe& one) { return one.open(); });
  if (to_wait_for && !watching_for_return && !closing) {
    watching_for_return = true;
    tasks.spawn(watch_for_return());
  }
  for (const auto& one : safe) {
    if (auto text = warning_of(one); !text.empty()) warnings.push_back(std::move(text));
  }
  if (safe.empty()) {
    warnings.push_back("No instrument switches this bench off. Switch it off by hand, and " +
                       std::string{kProveDead} + ".");
    event("safe state", "sequencer", warnings.back());
  }
  for (const auto& one : safe) {
    if (const auto text = warning_of(one); !text.empty())
      event("safe state not confirmed", one.control, text);
  }
}

/// Nothing is owed any more when no command can make the bench safer than it is.
void Sequencer::State::settle_owed() {
  if (run_task || making_safe) return;
  if (std::any_of(safe.begin(), safe.end(), [](const Safe& one) { return one.open(); })) return;
  for (const auto owed : std::exchange(owing, {})) bench.writer().post(store::SafeStateItem{owed});
}

/// An instrument that comes back after its safe state could not be confirmed gets it then.
awaitable<void> Sequencer::State::watch_for_return() {
  const auto self = shared_from_this();
  while (!closing) {
    co_await clock.sleep_for(std::chrono::milliseconds{500});
    if (making_safe) continue;
    bool open = false;
    for (std::size_t place = 0; place < safe.size(); ++place) {
      if (!safe[place].open()) continue;
      if (!bench.may_command(safe[place].control)) {
        open = true;
        continue;
      }
      co_await make_one_safe(place);
      if (making_safe || place >= safe.size()) break;
      if (safe[place].open()) {
        open = true;
        continue;
      }
      const auto name = "THE SAFE STATE OF " + safe[place].control + " ";
      std::erase_if(warnings, [&name](const std::string& text) { return text.starts_with(name); });
      if (auto text = warning_of(safe[place]); !text.empty()) {
        warnings.push_back(text);
        event("safe state not confirmed", safe[place].control, std::move(text));
      }
      changed();
    }
    if (!open && !making_safe) break;
  }
  watching_for_return = false;
  settle_owed();
}

awaitable<void> Sequencer::State::wait_for_safe_state() {
  while (true) {
    while (making_safe) co_await safe_done.wait_until(INT64_MAX);
    // A command of the run that was under way when the safe state began may have had the last word.
    if (!command_since || commanding > 0) co_return;
    command_since = false;
    begin_safe_state();
  }
}

awaitable<void> Sequencer::State::pass_time(double length_s, std::string what) {
  if (length_s <= 0.0) co_return;
  const auto end = clock.now_ns() + ticks_of(length_s);
  enter(StepPhase::safe_state, std::move(what), end);
  while (!closing && clock.now_ns() < end) co_await wake.wait_until(end);
  if (clock.now_ns() < end) {
    event("discharge", "sequencer",
          "closed " + base::print_fixed(seconds_of(end - clock.now_ns()), 1) +
              " s before the time was over; capacitors may be charged: " + kProveDead);
  }
}

awaitable<void> Sequencer::State::cool_down() {
  if (!energised) co_return;
  co_await pass_time(stair.end.cool_down_s, "cools down");
  if (stair.end.discharge_s <= 0.0) co_return;
  const auto text = "discharges for " + brief(stair.end.discharge_s) + " s; then " + kProveDead;
  event("discharge", "sequencer", text);
  co_await pass_time(stair.end.discharge_s, text);
}

awaitable<void> Sequencer::State::finish(store::RunState end) {
  phase = RunPhase::making_safe;
  disarm_guards();
  prompt.reset();
  enter(StepPhase::safe_state, "makes the bench safe: converter, load, source");
  if (!stop_demand) begin_safe_state();
  co_await wait_for_safe_state();
  bench.set_step(-1);
  co_await cool_down();
  stop_listening();
  store::RunEnd item;
  item.run = run;
  item.state = end;
  item.ended_ns = clock.now_ns();
  item.reason = reason;
  bench.writer().post(item);
  bench.end_run();
  phase = end == store::RunState::done ? RunPhase::done : RunPhase::stopped;
  run_task = false;
  settle_owed();
  enter(StepPhase::none, "");
}

awaitable<void> Sequencer::State::after_crash(std::vector<store::RunId> owed) {
  const auto self = shared_from_this();
  owing.insert(owing.end(), owed.begin(), owed.end());
  if (busy()) co_return;  // the run that goes on ends in the safe state that is owed
  crash_task = true;
  event_run = owed.empty() ? 0 : owed.back();
  phase = RunPhase::making_safe;
  enter(StepPhase::safe_state, "makes the bench safe after a run that left it unsafe");
  event(
      "interrupted", "sequencer",
      "a run was interrupted, or its safe state was never confirmed; the bench is made safe now. Capacitors "
      "may be charged and the load hot: " +
          std::string{kProveDead});
  begin_safe_state();
  co_await wait_for_safe_state();
  phase = RunPhase::idle;
  crash_task = false;
  settle_owed();
  enter(StepPhase::none, "");
}

boost::asio::awaitable<void> Sequencer::make_safe_after_crash(std::vector<store::RunId> owed) {
  const auto state = state_;
  co_await state->after_crash(std::move(owed));
}

}  // namespace loadstair::sequencer
