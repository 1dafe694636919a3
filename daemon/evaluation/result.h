// Results of a run as plain values, in the shape that `show RUN --json` prints.
#pragma once

#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "analysis/efficiency/curve.h"

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

struct StepResult {
  int index = 0;
  std::string label;
  double load_w = 0.0;       ///< nominal
  std::string state;         ///< of the step in the run: "done", "averaging", "skipped", ...
  std::string result_state;  ///< "measured", "apparent power only", "missing channel ...", "not measured"
  Quantity input_power, output_power, efficiency, loss, power_factor, thd_voltage, crest_factor, frequency;
  std::vector<TemperatureResult> temperatures;
  SettledResult settled;
  std::vector<BudgetEntry> budget;  ///< of the efficiency, largest share first; empty without one
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
  };
  std::vector<Use> uses;
};

struct RunResult {
  std::int64_t run = 0;
  std::string prototype, revision, unit, state;
  std::vector<StepResult> steps;
  std::vector<CurveEntry> curve;
  std::vector<WeightedResult> weighted;  ///< European, CEC
  std::vector<std::string> remarks;
  std::string method_version;                  ///< of this program's evaluation
  std::vector<efficiency::CurvePoint> points;  ///< the curve with its sources, for comparisons; not printed
};

}  // namespace loadstair::evaluation
