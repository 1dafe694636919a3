// Results of a run as plain values, in the shape that `show RUN --json` prints.
#pragma once

#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "analysis/efficiency/comparison.h"
#include "analysis/efficiency/curve.h"
#include "analysis/efficiency/weighted.h"

namespace loadstair::evaluation {

/// A number that a person may quote, or why there is none. Never NaN.
struct Quantity {
  bool known = false;
  double value = 0.0;
  std::string unit;              ///< "W", "1", "degC", ...; a ratio has "1"
  double low = 0.0, high = 0.0;  ///< 95 % interval
  double level = 0.95;
  std::string method;                 ///< "linear" or "monte-carlo"
  std::optional<double> expanded, k;  ///< only when linear
  /// There is a value but nothing is known of its error: "uncertainty not known". Then low, high, level and
  /// method mean nothing, and the value enters no efficiency and no decision.
  bool uncertainty_known = true;
  bool lower_bound = false;  ///< at least this much (clipped peaks)
  std::string why;           ///< not known: what is missing; uncertainty not known: that
};

struct TemperatureResult {
  std::string place, channel;
  Quantity end;     ///< end temperature, degC
  std::string how;  ///< "measured" or "predicted"; empty when end is not known
  std::optional<Quantity> ambient;
  std::optional<Quantity> thermal_resistance;  ///< (end - ambient) / loss, K/W
  std::optional<Quantity> at_highest_ambient;  ///< degC, at Ratings::highest_ambient_c
  /// Last step of a run only: the first acceptable prediction against what was measured in the end.
  struct HoldOut {
    double after_s = 0.0;  ///< when it could have ended the step, s after the set point
    double predicted = 0.0, low = 0.0, high = 0.0, measured = 0.0;
    bool held = false;
    std::string text;
  };
  std::optional<HoldOut> hold_out;
};

struct SettledResult {
  bool settled = false;
  std::string by;                 ///< "slope", "rate", "prediction", "no criterion", "not settled"
  std::optional<double> after_s;  ///< from the end of the soak to the criterion
  std::string text;               ///< for a person
};

struct BudgetEntry {
  std::string source;  ///< "V1 on 600 V: gain"
  std::string instrument, function, range;
  bool type_a = false;
  double standard_uncertainty = 0.0;  ///< in the unit of the result
  double share = 0.0;                 ///< of the variance; all shares sum to 1
  std::string action;                 ///< what would shrink it; may be empty
  std::optional<double> expanded_if_done;
};

struct PortResult {
  std::string name, direction;  ///< "input", "output"
  bool counted = true;
  std::string state,
      method;  ///< "measured", "apparent power only", "missing channel ..."; "V x I", "wattmeter"
  Quantity power, apparent_power, power_factor, voltage, current;
  std::vector<std::string> corrections;  ///< "voltmeter burden -0.016 W"
};

/// Monte Carlo beside the linear method (JCGM 101 8.1).
struct Validation {
  bool agrees = false;
  std::uint64_t draws = 0;
  double low_difference = 0.0, high_difference = 0.0, tolerance = 0.0;  ///< of the interval's ends
  std::string text;
};

struct StepResult {
  int index = 0;
  std::string label;
  std::string kind = "level";  ///< setup::name_of(StepKind)
  double load_w = 0.0;         ///< nominal
  std::string state;           ///< of the step in the run: "done", "averaging", "skipped", ...
  std::string result_state;    ///< "measured", "apparent power only", "missing channel ...", "not measured"
  Quantity input_power, output_power, efficiency, loss, power_factor, thd_voltage, crest_factor, frequency;
  Quantity thd_current, dc_component;  ///< of the AC output; V
  /// Loss and efficiency at the end temperature, where the soak showed how the loss goes with temperature.
  std::optional<Quantity> loss_projected, efficiency_projected;
  std::string projection_text;
  std::optional<Validation> validation;  ///< of the efficiency
  std::vector<TemperatureResult> temperatures;
  SettledResult settled;
  std::vector<BudgetEntry> budget;  ///< of the efficiency, largest share first; empty without one
  std::vector<BudgetEntry> loss_budget;
  std::vector<PortResult> ports;
  std::vector<std::string> remarks;
};

struct CurveEntry {
  std::string label;
  Quantity output_power, efficiency, loss;
};

struct WeightedResult {
  std::string title;  ///< "European efficiency"
  Quantity efficiency;
  struct Use {
    double fraction = 0.0, weight = 0.0;
    std::string from;
    Quantity efficiency;
    std::optional<Quantity> shift;  ///< nominal minus measured efficiency; nullopt: not moved
  };
  std::vector<Use> uses;
};

/// p0 + p1 P + p2 P^2 and what follows from it.
struct ModelResult {
  std::string span;  ///< "all levels", or what one piece of a split curve is called
  Quantity p0, p1, p2;
  double chi_squared = 0.0, degrees_of_freedom = 0.0;
  std::string lack_of_fit;  ///< "not significant", "not tested (4 levels)", ...
  bool used = false;        ///< whether its figures may be quoted
  Quantity peak_power, peak_efficiency;
};

struct FoldBackResult {
  Quantity knee_current, knee_power, expected_current;
  std::string sense, text;
};

struct StartUpResult {
  Quantity rise_time, overshoot;  ///< s; share of the final value
  bool monotonic = false;
  std::string text;
};

/// One channel's zero, or one tied channel against the tie's first.
struct BenchCheckResult {
  std::string kind, name, channel;  ///< "zero", "tie"
  Quantity before, after;           ///< zero: in the channel's unit
  Quantity ratio, offset;           ///< tie: gain over the first channel's; offset in its unit
  bool applied = false;
  std::string text;
};

struct ClosureResult {
  std::string label, again;  ///< the two steps
  Quantity difference;       ///< efficiency of the repeat minus the first
  double allowed = 0.0;      ///< half-width that the budget allows, ratio
  bool held = false;
  std::string text;
};

struct DecisionResult {
  std::string name, quantity, step;  ///< step empty: a figure of the run
  Quantity value;
  std::optional<double> low, high;    ///< in the unit of the value
  std::string decision;               ///< "pass", "fail", "undecided", "indicative", "not decided"
  std::optional<double> probability;  ///< that the true value conforms
  std::string source, text;
};

/// What tells one meter from another of the same name.
struct MeterIdentity {
  std::string name, profile, serial_number, calibrated;  ///< as in the hook-up file; may be empty
};

struct RunResult {
  std::int64_t run = 0;
  std::string prototype, revision, unit, state;
  std::vector<StepResult> steps;
  std::vector<CurveEntry> curve;
  std::vector<WeightedResult> weighted;                         ///< European, CEC
  std::vector<ModelResult> models;                              ///< one; more where the curve is split
  Quantity no_load, standby, load_regulation, line_regulation;  ///< W; ratios
  std::optional<FoldBackResult> fold_back;
  std::optional<StartUpResult> start_up;
  std::vector<BenchCheckResult> bench_checks;
  std::vector<ClosureResult> closure;
  std::vector<DecisionResult> decisions;
  std::string decision_rule;  ///< the one rule of the report
  std::vector<std::string> remarks;
  std::string method_version;                  ///< of this program's evaluation
  std::vector<efficiency::CurvePoint> points;  ///< the curve with its sources, for comparisons; not printed
  std::vector<efficiency::Weighted> weighted_sources;  ///< the same of the weighted figures
  std::vector<efficiency::LossPiece> pieces;           ///< of the curve, with their models
  std::vector<efficiency::Around> around;              ///< of each point
  std::vector<MeterIdentity> meters;                   ///< linked ones
  double rated_power_w = 0.0;                          ///< output; 0: not declared
};

}  // namespace loadstair::evaluation
