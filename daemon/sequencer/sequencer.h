// sequencer: takes a prototype through its stair, one run at a time - set points, prompts, soak, settling,
// averaging window, typed rounds, captures - with guards, and leaves the bench in its safe state whatever
// happens. Not for talking to instruments (recorder) and not for results (evaluation). Its guards are
// conveniences on top of real protection, never instead of it.
#pragma once

#include <boost/asio/awaitable.hpp>
#include <cstdint>
#include <functional>
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "analysis/base/outcome.h"
#include "daemon/recorder/bench.h"
#include "daemon/setup/stair.h"
#include "daemon/store/items.h"

namespace loadstair::sequencer {

enum class RunPhase { idle, running, holding, making_safe, done, stopped };
enum class StepPhase { none, start, apply, prompt, soak, settle, average, typed, capture, hold, safe_state };

/// Words for commands, page and JSON: "idle", "running", "holding", "making safe", "done", "stopped";
/// "apply", "prompt", "soak", "settle", "average", "typed round", "capture", "hold", "safe state".
[[nodiscard]] std::string_view name_of(RunPhase phase);
[[nodiscard]] std::string_view name_of(StepPhase phase);

enum class PromptKind { hand, typed, confirm };
[[nodiscard]] std::string_view name_of(PromptKind kind);

/// Something that a person has to do or to read.
struct OpenPrompt {
  std::int64_t id = 0;  ///< from 1, never used twice in a daemon's life
  PromptKind kind = PromptKind::hand;
  std::string text;
  std::vector<std::string> cautions;  ///< to be shown with it, always
  std::int64_t since_ns = 0;          ///< monotonic
  // typed and confirm:
  std::string channel;
  std::string unit;                  ///< in which the value is asked (SI prefixes are understood)
  std::int32_t round = 0;            ///< 1 or 2
  std::int32_t rounds = 0;           ///< how many there are: 2
  std::optional<double> low, high;   ///< what is plausible
  std::vector<double> ranges;        ///< full scales that the hook-up declares
  std::optional<double> last_value;  ///< entered for this channel before
  std::string why;                   ///< confirm: why it is asked again
  std::string value_text;            ///< confirm: what was entered
};

/// What a person typed, as text. Numbers may have a decimal comma; the value may carry its unit ("385,2 V").
struct TypedEntry {
  std::string value;
  std::string unit;        ///< empty: the channel's; "mV" is understood
  std::string range;       ///< full scale, in the same unit; empty: not given
  std::string last_digit;  ///< weight of the last digit; empty: from the digits as typed
  bool confirmed = false;  ///< the person was asked and stays with an implausible value
};

/// A typed value of the present step.
struct TypedNow {
  std::int64_t prompt = 0;  ///< enter_typed() with this id corrects it
  std::string channel;
  std::int32_t round = 0;
  std::string text;
  double value = 0.0;  ///< in the channel's unit before conversion
  std::string unit;
  bool superseded = false;
};

struct GuardNow {
  std::string name, channel, unit;
  std::optional<double> value;         ///< the last usable one; nullopt: missing
  std::optional<double> above, below;  ///< limits as they are watched now: a dead output has no lower one
  std::optional<double> margin;        ///< distance to the nearest limit, negative beyond it
  std::string state;                   ///< "watching", "blanked", "beyond", "missing", "tripped", "off"
  std::string action;                  ///< "stop", "hold", "next"
};

struct Trip {
  std::int64_t t_ns = 0;
  std::string guard, text, action;
};

struct Snapshot {
  std::uint64_t change = 0;  ///< grows with every change that is worth showing
  store::RunId run = 0;      ///< the present run, or the last one; 0: none yet
  RunPhase phase = RunPhase::idle;
  std::string prototype;  ///< "Marten revision C, unit C-003"
  StepPhase step_phase = StepPhase::none;
  std::int32_t step = -1;
  std::int32_t steps = 0;
  std::string label;
  std::string waits_for;              ///< for a person: what it waits for, or what it does
  std::optional<double> remaining_s;  ///< how long still, as far as can be said
  std::optional<OpenPrompt> prompt;
  std::vector<TypedNow> typed;  ///< of the present step
  std::vector<GuardNow> guards;
  std::vector<Trip> trips;
  std::vector<recorder::BenchEvent> events;  ///< the last ones, oldest first
  std::string reason;                        ///< why it stopped or holds
  std::vector<std::string> warnings;         ///< loud: a safe state that nobody confirmed; what to do
};

struct SequencerOptions {
  std::string program_version, method_version;
  std::string zone = "UTC";  ///< of the reports
  std::uint64_t seed = 1;    ///< stored with the run, for Monte Carlo
  /// Asks for a capture of the running step (the rehearsal's scope, a trigger command). Empty: the person at
  /// the bench saves one.
  std::function<void(const std::string& step_label)> request_capture;
  double capture_limit_s = 60.0;  ///< after this the step goes on without its capture
  double ready_limit_s = 15.0;    ///< for the instruments to be there before a start
};

/// Lives on the bench's executor, one thread, no locks. The bench outlives it.
class Sequencer {
 public:
  Sequencer(recorder::Bench& bench, SequencerOptions options);
  ~Sequencer();
  Sequencer(const Sequencer&) = delete;
  Sequencer& operator=(const Sequencer&) = delete;

  /// Begins a run. Returns its number at once; what goes wrong later is in the snapshot and in the record.
  /// Refusals: a run is going on or the safe state is being made; the stair does not fit the hook-up.
  [[nodiscard]] base::Outcome<store::RunId> start(setup::Stair stair);

  /// Ends the run in its safe state. `reason` is stored. Refusal: no run is going on.
  base::Outcome<void> stop(std::string reason);
  /// A hand prompt was followed. `by`: "terminal", "page", "rehearsal". Refusal: not the open prompt.
  base::Outcome<void> answer(std::int64_t prompt, std::string by);
  /// A hand prompt cannot be followed: the step is skipped. A typed one: this channel gets no value in this
  /// round.
  base::Outcome<void> refuse(std::int64_t prompt, std::string reason);
  /// Answers a typed prompt, or, with the id of one answered earlier in this step, corrects it.
  /// Refusals: not a number, a unit of another kind, not the open prompt; and an implausible value, once: the
  /// prompt turns into a `confirm` (same id), and `confirmed = true` accepts it.
  base::Outcome<void> enter_typed(std::int64_t prompt, TypedEntry entry, std::string by = "terminal");
  /// After a hold: the step begins again with its soak. Refusal: nothing is held.
  base::Outcome<void> resume();
  /// Leaves the present step for the next one (also from a hold). Refusal: no run.
  base::Outcome<void> skip(std::string reason);

  [[nodiscard]] Snapshot snapshot() const;
  [[nodiscard]] std::uint64_t change() const;
  /// Called on the executor after changes, at most once a turn. Must be short and must not throw. Empty:
  /// nobody.
  void on_change(std::function<void()> callback);

  [[nodiscard]] bool busy() const;  ///< a run is going on, or a safe state is being made
  /// Waits until nothing is going on any more.
  [[nodiscard]] boost::asio::awaitable<void> idle();

  /// The safe state after a crash: to every control as soon as its instrument is there and is what it should
  /// be. `owed`: the runs of which the record says that it is owed (store::Record::owed_safe_states); the
  /// events go to the last of them, and the record hears when it is owed no more, however late that is.
  [[nodiscard]] boost::asio::awaitable<void> make_safe_after_crash(std::vector<store::RunId> owed);

  /// Stops the run if there is one, waits for the safe state, ends its tasks. Call it before Bench::close().
  [[nodiscard]] boost::asio::awaitable<void> close(std::string reason);

 private:
  struct State;
  std::shared_ptr<State> state_;
};

/// The cautions that go with anything done by hand on this bench.
/// live   a port at a dangerous voltage is among the hook-up's.
[[nodiscard]] std::vector<std::string> hand_cautions(const setup::Hookup& hookup);

}  // namespace loadstair::sequencer
