// The stair file: what to do on the bench, step by step.
#pragma once

#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"
#include "daemon/setup/hookup.h"

namespace loadstair::setup {

struct Prototype {
  std::string name, revision, unit;
};

struct Ratings {
  double input_voltage_v = 0.0;
  double output_voltage_v = 0.0;
  double output_power_w = 0.0;
  double output_frequency_hz = 0.0;  ///< 0: dc
  double highest_ambient_c = 40.0;
  /// What `check` forecasts with, before anything was measured (95: common practice, no source).
  double expected_efficiency_percent = 95.0;
};

/// The overload circuit of the prototype: its expected trip is compared with the fold-back that was found.
struct Overload {
  std::string sense = "peak";  ///< peak, rms, average
  double threshold_v = 0.0, sense_ohm = 0.0;
  std::optional<double> threshold_tolerance_percent, sense_tolerance_percent;
};

/// One thing that is set before a step.
struct SetPoint {
  std::string control, setting;
  double value = 0.0;
};

/// The electrical criterion: slope of a channel over the last window below a limit.
struct ElectricalSettle {
  std::string channel;
  double slope_percent_per_min = 0.0;
  double window_s = 0.0;
};
/// The thermal criterion: change over a window, met `count` times in a row; and, if allowed, by prediction.
struct ThermalSettle {
  std::string channel;
  double change_k = 0.0;
  double window_s = 0.0;
  int count = 1;
  double hold_s = 0.0;
  bool by_prediction = false;  ///< a prediction may end the step
  double prediction_tolerance_k = 1.0;
  double slowest_tau_s = 0.0;  ///< slowest constant that a window could hide; 0: not declared
};

/// What a step is for. Only levels make the curve; the others are checks of the bench, or figures of their
/// own.
enum class StepKind {
  level,
  zero,     ///< everything off, inputs shorted: the meters' zeros, before and after
  tie,      ///< meters in parallel or in series on one quantity: their ratio
  closure,  ///< a level visited again
  no_load,  ///< converter on, load off
  standby,  ///< source on, converter off
};
[[nodiscard]] std::string_view name_of(StepKind kind);

struct Step {
  std::string label;
  StepKind kind = StepKind::level;
  std::size_t check = 0;  ///< ties: which of Stair::ties; closure: index of the step that is visited again
  std::vector<std::string> on;  ///< ties, standby, no load: controls that are on; see controls_on()
  /// Asked with everything switched off and discharged, before anything else of this step: the wiring is
  /// changed. Empty: none.
  std::string rewire;
  std::string rewire_action;  ///< what the rehearsal does then; "; " between two actions
  std::string written_at;     ///< where in the file: "staircase", "steps/0", "checks/zero", ...: a path of
                              ///< drivers/document
  double load_w = 0.0;        ///< nominal output power of the step, for the curve and the weights
  std::optional<double> input_voltage_v;
  std::vector<SetPoint> set;
  std::string prompt;       ///< a sentence for the person at the bench; empty: none
  std::string hand_action;  ///< what the rehearsal does when the prompt is answered by itself
  double soak_s = 0.0;
  std::optional<ElectricalSettle> electrical;
  std::optional<ThermalSettle> thermal;
  double settle_limit_s = 0.0;  ///< after this the step goes on, "not settled"
  double average_s = 0.0;
  bool capture = false;
};

enum class GuardAction { stop, hold, next };
enum class MissingAction { ignore, stop, hold, next };

/// A software guard. A convenience on top of real protection, never instead of it.
struct Guard {
  std::string name, channel;
  std::optional<double> above, below;  ///< trips beyond these, in the channel's unit
  double debounce_s = 0.0;
  double blanking_s = 0.0;  ///< after each set-point change
  GuardAction action = GuardAction::stop;
  MissingAction missing = MissingAction::stop;
  double missing_after_s = 0.0;  ///< 0: three periods (poll_s; update_s of a meter that sends by itself)
};

/// What comes after the last step, beside switching off.
struct End {
  double cool_down_s = 0.0;
  double discharge_s = 0.0;  ///< timed discharge before anybody touches the bench
};

/// Meters on one quantity: the channels' readings are equal but for the meters' errors.
struct Tie {
  std::string name;
  std::vector<std::string> channels;  ///< the first one is what the others are tied to
};

/// A limit of the stair file's own, or a table of analysis/limits; decided by guarded acceptance.
struct Limit {
  std::string name;  ///< as the report prints it
  /// efficiency, loss, input_power, output_power, power_factor, thd_voltage, thd_current, crest_factor,
  /// frequency, dc_component, no_load, standby, european, cec, load_regulation, line_regulation,
  /// "temperature PLACE" (end), "hot PLACE" (at the highest ambient)
  std::string quantity;
  std::string unit;  ///< of low and high: V, W, degC, %, 1, ...
  std::optional<double> low, high;
  std::vector<std::string> at;  ///< labels of steps; empty: every level that has it (or the run's own figure)
  std::string table;            ///< id of a limit table instead of quantity, unit, low and high; empty: none
};

struct Stair {
  std::string file, text;
  Prototype prototype;
  Ratings ratings;
  std::optional<Overload> overload;
  double ambient_c = 23.0;
  double load_tolerance_percent = 2.0;
  std::vector<Step> steps;  ///< with the checks of the bench in their places
  std::vector<Tie> ties;
  std::vector<std::string> zero_channels;  ///< whose zeros are measured and taken off; empty: no zero check
  std::vector<Limit> limits;
  double guard_factor = 1.0;  ///< guard band w = r U: the one decision rule of the report
  std::vector<Guard> guards;
  End end;
};

/// The controls that are on during a step: none at a zero, those of `on` at a tie; at standby and without
/// load those of `on`, or, where it names none, sources at standby and all but loads without load; else all.
/// In the order of the hook-up file.
[[nodiscard]] std::vector<std::string> controls_on(const Step& step, const Hookup& hookup);

/// Reads a stair file's text; the short form over load levels is expanded into steps.
/// Refusal as for the hook-up file.
[[nodiscard]] base::Outcome<Stair> read_stair(std::string_view text, const std::string& file);
[[nodiscard]] base::Outcome<Stair> load_stair(const std::string& file);

/// Do the two files fit: every channel, control and setting that the stair names exists, guards have a
/// channel that is polled, the typed channels are not guarded. Refusal with the stair's place.
[[nodiscard]] base::Outcome<void> match(const Stair& stair, const Hookup& hookup);

}  // namespace loadstair::setup
