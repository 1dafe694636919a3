// The simulated prototype with its source and its loads: a converter from the source's terminals to the
// load's. Plain parameters and settings, advanced in fixed steps; every step holds the true means of what
// happened in it. Not for meters (meters.h) nor for time and links (bench.h). Shares nothing with analysis,
// on purpose.
#pragma once

#include <array>
#include <complex>
#include <cstddef>
#include <memory>
#include <vector>

#include "drivers/rehearsal/lamps.h"
#include "drivers/rehearsal/two_nodes.h"

namespace loadstair::rehearsal {

enum class ConverterKind {
  inverter,  ///< DC in, single-phase AC out
  dcdc,      ///< DC in, DC out
};

/// What the overload circuit of the converter looks at.
enum class SenseKind { peak, rms, average };

/// One line of a spectrum, relative to the fundamental.
struct Line {
  int order = 3;
  double share = 0.0;      ///< rms over the rms of the fundamental
  double phase_deg = 0.0;  ///< sine phase; zero is the upward zero of the output voltage's fundamental
};

/// loss = no_load + linear * P + quadratic * (I * nominal voltage)^2 * (1 + rise * (T_junction -
/// T_reference)). The last term is the conduction loss: it follows the current, also where overload lets the
/// voltage sag.
struct LossParameters {
  double no_load_w = 5.0;
  double linear = 0.012;
  double quadratic_per_w = 2.2e-5;
  double resistance_rise_per_k = 0.004;
  double reference_temperature_c = 25.0;
  double standby_w = 0.8;             ///< taken from a live input while the output is off
  double input_voltage_effect = 0.0;  ///< relative change of loss per relative change of input voltage
};

struct OutputParameters {
  double nominal_voltage_v = 230.0;  ///< rms, or DC
  double frequency_hz = 50.0;        ///< inverter only
  double impedance_ohm = 0.8;        ///< resistive: load regulation
  double soft_start_s = 0.4;         ///< linear ramp
  double dc_offset_v = 0.02;         ///< inverter only
  std::vector<Line> harmonics = {{3, 0.008, 180.0}, {5, 0.006, 20.0}, {7, 0.003, 90.0}};
  double residue_share = 0.005;         ///< switching residue, rms over nominal voltage
  int residue_ratio = 400;              ///< its frequency over the output frequency (inverter)
  double residue_frequency_hz = 100e3;  ///< and its frequency for a dcdc
  double greatest_modulation =
      1.0;  ///< peak of the output over the input voltage (a bridge without boost: 1)
};

struct OverloadParameters {
  double threshold_v = 0.5;  ///< at the sense resistor
  double sense_ohm = 0.1;    ///< 0: no overload circuit
  SenseKind sense = SenseKind::peak;
  double fold_back = 0.0;  ///< 0: constant current; toward 1 the current limit falls with the voltage
};

struct InputParameters {
  double nominal_voltage_v = 385.0;
  double least_voltage_v = 300.0;  ///< below: off; on again 5 % above
  double ripple_share = 0.02;      ///< peak of the current at twice the output frequency that reaches the
                                   ///< terminals, over the mean current (inverter only)
};

struct ConverterParameters {
  ConverterKind kind = ConverterKind::inverter;
  LossParameters loss;
  OutputParameters output;
  OverloadParameters overload;
  InputParameters input;
  ThermalParameters thermal;
};

struct SourceParameters {
  double resistance_ohm = 0.05;
  double current_limit_a = 10.0;
  double slew_v_per_s = 2000.0;
  double setting_gain = 0.0;  ///< relative error of its own setting
};

/// The programmable load. Its harmonics flow whatever the voltage's shape (a rectifier's current).
struct LoadParameters {
  double greatest_current_a = 12.0;
  double least_voltage_share = 0.85;  ///< of the nominal output: below it constant power is a resistance, so
                                      ///< that a soft start does not meet the whole power at a few volts
  double displacement_deg = 0.0;      ///< the fundamental current lags by this (inverter only)
  std::vector<Line> harmonics;
  double setting_gain = 0.0;
};

/// Lead resistances of a port, both conductors together. The chain from the converter's terminals outward:
/// terminals - inner lead - inner node - ammeter - outer node - outer lead - source or load.
struct PortLeads {
  double inner_ohm = 0.0;
  double outer_ohm = 0.0;
};

/// What the meters do to a port. Filled by the bench from the ranges the meters stand on.
struct PortBurden {
  double ammeter_ohm = 0.0;
  double terminals_siemens = 0.0;
  double inner_siemens = 0.0;
  double outer_siemens = 0.0;
};

struct PlantParameters {
  double step_s = 0.02;  ///< one step; means over a step are means over whole cycles of the output
  ConverterParameters converter;
  SourceParameters source;
  LoadParameters load;
  LampParameters lamps;
  std::vector<double> resistors_ohm;
  PortLeads input_leads;
  PortLeads output_leads;
  double ambient_c = 24.0;
  double ambient_drift_k_per_h = 0.0;
  double ambient_swing_k = 0.0;  ///< amplitude of a slow sine beside the drift
  double ambient_swing_period_s = 1800.0;
  double thermal_speed = 1.0;  ///< thermal time runs this much faster (demos; printed as such)
};

enum class LoadMode { power, resistance, current };

/// The knobs: what a person or a command can set.
struct PlantSettings {
  double source_voltage_v = 385.0;
  bool source_on = false;
  bool converter_on = true;  ///< its enable switch
  LoadMode load_mode = LoadMode::power;
  double load_power_w = 0.0;
  double load_resistance_ohm = 1e6;
  double load_current_a = 0.0;
  bool load_on = false;
  int lamps_on = 0;
  int resistors_on = 0;  ///< the first so many of resistors_ohm
};

enum class Node { terminals, inner, outer };

/// A signal over one step.
struct SignalMeans {
  double mean = 0.0;
  double mean_square = 0.0;
  double mean_rectified = 0.0;  ///< of the part without DC
};

/// A port over one step. Powers are true means of v*i.
struct PortStep {
  std::array<SignalMeans, 3> voltage;  ///< by Node
  SignalMeans current;                 ///< through the converter's terminals
  SignalMeans meter_current;           ///< through the ammeter
  double power_w = 0.0;                ///< at the converter's terminals
  std::array<double, 3>
      meter_power_w{};  ///< voltage at the node times the ammeter's current: what a wattmeter sees
};

/// Enough to draw the waveforms of a step. Fundamental and lines are rms phasors (sine phase).
struct WaveStep {
  std::complex<double> voltage_v;  ///< fundamental at the terminals
  std::complex<double> current_a;
  double voltage_dc_v = 0.0;
  double current_dc_a = 0.0;
  double conductance_s = 0.0;  ///< of the load to harmonics, DC and residue
  double residue_v = 0.0;
  double own_current_a = 0.0;  ///< scale of the load's own harmonics
  double input_voltage_v = 0.0;
  double input_current_a = 0.0;
  double input_ripple_a = 0.0;    ///< peak
  double input_ripple_ohm = 0.0;  ///< that the ripple meets outside the terminals
};

struct PlantStep {
  PortStep input;
  PortStep output;
  WaveStep wave;
  double loss_w = 0.0;        ///< input.power_w - output.power_w
  double load_power_w = 0.0;  ///< dissipated in lamps, resistors and programmable load
  double frequency_hz = 0.0;  ///< of the output; 0 when there is none
  double junction_c = 0.0;
  double case_c = 0.0;
  double ambient_c = 0.0;
  bool running = false;
  bool folded_back = false;
  bool fan_on = false;
};

struct OutputLoad;
class OutputPort;

class Plant {
 public:
  explicit Plant(PlantParameters parameters);
  ~Plant();
  Plant(Plant&&) noexcept;
  Plant& operator=(Plant&&) noexcept;

  [[nodiscard]] const PlantParameters& parameters() const { return parameters_; }
  /// Effective from the next step on.
  PlantSettings settings;
  PortBurden input_burden;
  PortBurden output_burden;

  /// Advances by one step and returns its means; valid until the next call. About 0.5 microseconds.
  const PlantStep& step();
  [[nodiscard]] const PlantStep& last() const { return last_; }
  [[nodiscard]] double time_s() const { return static_cast<double>(steps_) * parameters_.step_s; }
  [[nodiscard]] const LampBank& lamps() const { return lamps_; }
  /// True steady state of the two nodes for the loss of the last step.
  [[nodiscard]] ThermalState steady_temperatures() const;

 private:
  [[nodiscard]] OutputLoad load_now() const;
  [[nodiscard]] double fold_back_factor(double sensed_a) const;
  [[nodiscard]] double loss(double output_power_w, double current_rms_a) const;
  void solve_output();
  void solve_input();
  void watch_input();

  PlantParameters parameters_;
  std::size_t steps_ = 0;
  double source_voltage_v_ = 0.0;
  double ramp_ = 0.0;
  bool alive_ = false;
  double load_voltage_v_ = 0.0;  ///< rms, over the step before
  TwoNodes nodes_;
  LampBank lamps_;
  std::unique_ptr<OutputPort> output_port_;
  PlantStep last_;
};

}  // namespace loadstair::rehearsal
