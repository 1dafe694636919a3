// The sequencer's inside: one object on one executor, its work split over several files.
//   sequencer.cpp   what the public functions do    run.cpp       the stair, phase by phase
//   power.cpp       what is on during a step        settle.cpp    is a step settled yet?
//   prompts.cpp     hand prompts and typed rounds   watch.cpp     guards, the record's health
//   snapshot.cpp    what is shown                   safe_state.cpp  safe state, cool down, after a crash
//
// How a run is interrupted: stop(), skip(), hold come as demands. The run's coroutine looks at them whenever
// it waits (wait_until) and after every command; the safe state does not wait for it but starts at once
// beside it.
#pragma once

#include <map>
#include <optional>
#include <string>
#include <vector>

#include "daemon/evaluation/live.h"
#include "daemon/sequencer/guard_watch.h"
#include "daemon/sequencer/sequencer.h"
#include "daemon/sequencer/ticks.h"
#include "daemon/sequencer/typed_value.h"
#include "drivers/link/notice.h"
#include "drivers/link/task_scope.h"

namespace loadstair::sequencer {

/// How a phase ended.
enum class Go {
  on,     ///< done: the next phase
  again,  ///< held and resumed: the step begins again with its soak
  next,   ///< the step is left
  stop,   ///< the run is over
};

/// Counts a command of the run as under way for as long as it is.
class Commanding {
 public:
  explicit Commanding(int& count) : count_{count} { ++count_; }
  ~Commanding() { --count_; }
  Commanding(const Commanding&) = delete;
  Commanding& operator=(const Commanding&) = delete;

 private:
  int& count_;
};

/// The hook-up's controls in the order in which they are made safe: converter, load, others, source.
[[nodiscard]] std::vector<setup::Control> in_safe_order(const setup::Hookup& hookup);

struct Sequencer::State : std::enable_shared_from_this<Sequencer::State> {
  State(recorder::Bench& the_bench, SequencerOptions the_options);

  // --- sequencer.cpp
  base::Outcome<store::RunId> start(setup::Stair new_stair);
  base::Outcome<void> stop(std::string why);
  void stop_now(std::string why);
  void listen();
  void stop_listening();
  [[nodiscard]] bool busy() const;
  void changed();
  void event(std::string kind, std::string source, std::string text);
  void tell_broken(const std::string& text);

  // --- run.cpp
  boost::asio::awaitable<void> run_stair();
  boost::asio::awaitable<Go> all_steps();
  boost::asio::awaitable<Go> prepare();
  boost::asio::awaitable<Go> wait_for_instruments();
  boost::asio::awaitable<Go> put_on_disk();
  boost::asio::awaitable<Go> run_step(std::int32_t index);
  boost::asio::awaitable<Go> measure(const setup::Step& plan);
  boost::asio::awaitable<Go> apply_all(const std::vector<setup::SetPoint>& points, std::int32_t for_step);
  boost::asio::awaitable<Go> soak(const setup::Step& plan);
  boost::asio::awaitable<Go> settle(const setup::Step& plan);
  boost::asio::awaitable<evaluation::WindowState> settling_now(const setup::Step& plan);
  boost::asio::awaitable<Go> average(const setup::Step& plan);
  boost::asio::awaitable<Go> capture(const setup::Step& plan);
  boost::asio::awaitable<Go> wait_for(std::function<bool()> condition, std::int64_t deadline_ns);
  boost::asio::awaitable<Go> wait_until(std::int64_t deadline_ns);
  boost::asio::awaitable<Go> hold();
  void enter(StepPhase phase, std::string what, std::optional<std::int64_t> until_ns = std::nullopt);
  void post_step(store::StepState state);
  void end_step(Go how);

  // --- power.cpp
  [[nodiscard]] base::Outcome<void> may_switch_off(const setup::Stair& wanted) const;
  boost::asio::awaitable<Go> bring_up(const setup::Step& plan);
  boost::asio::awaitable<Go> switch_on_all(const std::vector<std::string>& wanted, const setup::Step& plan);
  boost::asio::awaitable<Go> switch_off_all_but(const std::vector<std::string>& wanted);
  boost::asio::awaitable<Go> switch_off(const std::vector<std::string>& controls);
  boost::asio::awaitable<Go> rewire();
  void output_is_up(const setup::Step& plan);
  void owe_rewire(const setup::Step& plan);

  // --- prompts.cpp
  boost::asio::awaitable<Go> hand_prompt(const setup::Step& plan);
  boost::asio::awaitable<Go> ask_hand(std::string text, std::vector<std::string> cautions);
  boost::asio::awaitable<Go> typed_rounds(const setup::Step& plan, std::int64_t window_begin_ns,
                                          std::int64_t window_least_ns);
  boost::asio::awaitable<Go> typed_round(const setup::Step& plan, std::int32_t round);
  boost::asio::awaitable<Go> typed_prompt(std::size_t channel, std::int32_t round);
  base::Outcome<void> answer(std::int64_t id, std::string by);
  base::Outcome<void> refuse(std::int64_t id, std::string why);
  base::Outcome<void> enter_typed(std::int64_t id, const TypedEntry& entry, const std::string& by);
  /// Those that take part in a step: all, but at a zero or a tie the channels of that check.
  [[nodiscard]] std::vector<std::size_t> typed_channels(const setup::Step& plan) const;

  // --- watch.cpp
  struct Guarded {
    GuardWatch watch;
    std::size_t channel = 0;
  };
  boost::asio::awaitable<void> watch();
  void arm_guards();
  void rearm_tripped();
  void disarm_guards();
  void blank_guards();
  void watch_lower_limits(bool watched);
  void check_guard(Guarded& guarded);
  void trip(const GuardWatch& guard, const GuardWatch::Cause& cause);

  // --- safe_state.cpp
  void begin_safe_state();
  boost::asio::awaitable<void> try_all_safe();
  boost::asio::awaitable<void> make_all_safe();
  boost::asio::awaitable<void> make_one_safe(std::size_t place);
  boost::asio::awaitable<void> wait_for_safe_state();
  boost::asio::awaitable<void> watch_for_return();
  boost::asio::awaitable<void> pass_time(double length_s, std::string what);
  boost::asio::awaitable<void> cool_down();
  boost::asio::awaitable<void> after_crash(std::vector<store::RunId> owed);
  void tell_unconfirmed();
  void settle_owed();
  boost::asio::awaitable<void> finish(store::RunState end);

  // --- snapshot.cpp
  [[nodiscard]] Snapshot snapshot() const;

  recorder::Bench& bench;
  link::Clock& clock;
  SequencerOptions options;
  link::TaskScope tasks;       ///< the run, its watch
  link::TaskScope safe_tasks;  ///< the safe state: cancelled by nobody but close(), and only when it is done
  link::Notice wake;           ///< of the run's coroutine
  link::Notice one_safe;       ///< of the safe state's own coroutine
  link::Notice safe_done;      ///< of the run's coroutine, while the safe state is being made

  // the run
  setup::Stair stair;
  store::RunId run = 0;
  RunPhase phase = RunPhase::idle;
  StepPhase step_phase = StepPhase::none;
  std::int32_t step_index = -1;
  store::StepUpdate step;
  std::int64_t applied_ns = 0;  ///< when the step's set points were there
  std::string waits_for;
  std::optional<std::int64_t> until_ns;
  std::string reason;
  bool run_task = false;    ///< the run's coroutine lives
  bool crash_task = false;  ///< make_safe_after_crash is at work
  bool closing = false;
  bool energised = false;       ///< something was switched on in this run, or nobody knows
  std::vector<std::string> on;  ///< controls that were told to switch on, and not read back as off since
  std::string owed_rewire;      ///< asked before the next power; empty: the wiring is as it should be

  // demands
  std::optional<std::string> stop_demand, skip_demand, hold_demand;
  bool resume_demand = false;

  // guards
  std::vector<Guarded> guards;
  bool guards_armed = false;
  bool output_was_dead = false;  ///< in the last step that came to its soak
  std::vector<Trip> trips;

  // prompts
  struct Typed {
    std::int64_t prompt = 0;
    std::size_t channel = 0;
    std::int32_t round = 0;
    std::int64_t prompted_ns = 0, entered_ns = 0;
    TypedValue value;
    bool superseded = false;
  };
  std::int64_t next_prompt = 1;
  std::optional<OpenPrompt> prompt;
  std::size_t prompt_channel = 0;
  std::vector<Typed> typed;                    ///< of the present step, in the order of entry
  std::map<std::size_t, double> last_typed;    ///< by channel, in the meter's unit
  std::map<std::int64_t, TypedValue> doubted;  ///< implausible entries that wait for a second look, by prompt

  // safe state
  struct Safe {
    std::string control, instrument;
    bool possible = true;     ///< its profile says how
    bool confirmable = true;  ///< its profile says how to read it back
    bool confirmed = false;   ///< read back
    bool sent =
        false;  ///< written to the instrument that it belongs to; where not confirmable: all that can be
    bool tried = false;   ///< its limit has passed, or it is confirmed
    std::string failure;  ///< last one
    /// A command can still make it safe, or show that it is.
    [[nodiscard]] bool open() const { return possible && !confirmed && !(sent && !confirmable); }
  };
  [[nodiscard]] static std::string warning_of(const Safe& one);
  std::vector<Safe> safe;  ///< in the order in which they are made safe
  bool making_safe = false;
  bool watching_for_return = false;
  int commanding = 0;          ///< commands of the run under way
  bool command_since = false;  ///< a command of the run was under way when the safe state began
  store::RunId event_run = 0;  ///< to which run events outside a run go: the one whose safe state it is about
  std::vector<store::RunId> owing;  ///< runs of which the record says that their safe state is owed
  std::vector<std::string> warnings;

  // whoever looks on
  std::uint64_t changes = 0;
  bool change_posted = false;
  std::function<void()> change_callback;
  std::vector<recorder::Bench::Listener> listeners;
};

}  // namespace loadstair::sequencer
