// Ports: where power enters or leaves the converter, how it is measured there, and what the wiring does to
// it.
#pragma once

#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/estimate/estimate.h"

namespace loadstair::efficiency {

using estimate::Estimate;
using estimate::Quoted;

/// Value and standard uncertainty are finite numbers.
[[nodiscard]] bool is_finite(const Estimate& of);

enum class Role { input, output, auxiliary_input, auxiliary_output };
enum class Current { dc, ac };

/// Where the voltmeter hangs, seen from the converter: between converter and ammeter, or beyond the ammeter.
///   input,  converter side   source - A - V||converter : the ammeter also carries the voltmeter's current
///   input,  outer side       source - V - A - converter: the voltmeter also sees the ammeter's drop
///   output, converter side   converter||V - A - load   : the ammeter misses the voltmeter's current
///   output, outer side       converter - A - V||load   : the voltmeter misses the ammeter's drop
enum class VoltmeterPosition { converter_side, outer_side };

/// Whether the voltage is taken at the converter's terminals (the reference plane) by separate wires.
enum class Sensing { undeclared, at_terminals, not_at_terminals };

/// A resistance of the wiring, or of a meter.
/// name       identity: the same ammeter on the same range at two ports is one resistance ("A1 on 10 A:
/// burden") ohm        above zero tolerance  relative half-width (0.05 for 5 %); undeclared means +/-30 %,
/// rectangular
struct Resistance {
  std::string name;
  double ohm = 0;
  std::optional<double> tolerance;
};

inline constexpr double kUndeclaredTolerance = 0.30;

/// The resistance as an estimate, its tolerance as its one source.
[[nodiscard]] Estimate resistance_estimate(const Resistance& resistance);

struct Port {
  std::string name;
  Role role = Role::input;
  Current current = Current::dc;
  bool counted = true;  ///< of an auxiliary port: whether its power counts in the efficiency
  VoltmeterPosition voltmeter = VoltmeterPosition::converter_side;
  Sensing sensing = Sensing::undeclared;
  /// Both leads together, between the point where the voltage is taken and the terminals. Ignored with
  /// at_terminals.
  std::optional<Resistance> lead;
  std::optional<Resistance> ammeter;  ///< with its fuse; matters on the outer side
  std::optional<Resistance>
      voltmeter_impedance;  ///< matters on the converter side; a wattmeter's voltage circuit too
};

/// What was measured at a port over one step, already converted: V, A, W. nullopt: there is no such channel;
/// a refusal: there is one, but it has no value (place = the channel's name, reason = why). On AC, voltage
/// and current are RMS values.
struct PortReading {
  std::optional<Quoted> voltage;
  std::optional<Quoted> current;
  std::optional<Quoted> power;          ///< active power from a wattmeter
  std::optional<Quoted> capture_power;  ///< active power from a capture of this step
  std::optional<Quoted> power_factor;   ///< from a capture of this step, or declared as bounded(low, 1)
  /// V I PF less the wattmeter's power as if its functions had no source in common, W: for the cross-check,
  /// which must not take for granted what no specification promises. nullopt: as the readings have it.
  std::optional<Estimate> product_less_power;
  /// mean of (v - V)(i - I), W, on DC: from a capture, or a bound as an estimate. Added to V I.
  std::optional<Estimate> ripple_power;
};

/// From good to worse.
enum class PowerState { measured, apparent_only, missing };

/// One port's power had in two ways, before corrections.
struct CrossCheck {
  std::string used, other;  ///< "wattmeter", "V x I x PF"
  Estimate difference;      ///< other less used, W
  double allowed = 0;       ///< half-width of the difference's 95 % interval, W
  bool agrees = true;       ///< |difference| <= allowed
  std::string text;         ///< for a person
};

/// One port's power at the reference plane.
struct PortPower {
  std::string port;
  PowerState state = PowerState::missing;
  std::string
      state_text;  ///< "measured", "apparent power only", "missing channel V1: no good reading in the window"
  std::string method;                     ///< "V x I", "wattmeter", "capture", "V x I x PF"; empty when none
  Quoted active_power = base::Refusal{};  ///< W, corrected; positive in the direction of the port's role
  Quoted apparent_power = base::Refusal{};  ///< VA; on DC refused
  Quoted power_factor = base::Refusal{};    ///< P/S at the terminals; on DC refused
  Quoted voltage = base::Refusal{};         ///< at the terminals, V
  Quoted current = base::Refusal{};         ///< at the terminals, A
  std::optional<Estimate>
      correction;  ///< corrected minus uncorrected power, W; nullopt where nothing applies
  std::vector<std::string>
      correction_texts;                  ///< "voltmeter burden -0.016 W", "ammeter drop ...", "leads ..."
  std::vector<CrossCheck> cross_checks;  ///< the way that was used against each other one
  std::vector<std::string> remarks;      ///< disagreement of two ways, undeclared sensing that matters, ...
};

/// Power at the reference plane, corrected for burden and leads.
/// DC: V I (or a wattmeter). AC: wattmeter, else capture, else V I PF; with none of them "apparent power
/// only" and active_power refused. A port given two ways is cross-checked: a difference beyond its own 95 %
/// interval is a remark. The burden of an AC meter is taken as resistive. A reading that is not a finite
/// number counts as missing.
[[nodiscard]] PortPower port_power(const Port& port, const PortReading& reading);

/// Ripple power of a DC port without a capture, W. At an input, behind a source resistance R, a ripple
/// current i lets the voltage dip while it flows, so mean(v i) lies between -R i^2 and zero: correct by half
/// of it, rectangular (JCGM 100:2008 4.3.8). At an output the sign depends on the load (a resistor's is
/// positive, a constant-power load's negative, a capacitor's nothing): between -R i^2 and R i^2, nothing is
/// corrected.
/// ripple_current_rms_a, source_resistance_ohm   zero or more, as declared
/// run     the source of error is common to the port's steps in this run
/// Errors: refused where one of both is below zero or not finite.
[[nodiscard]] Quoted ripple_bound(const Port& port, double ripple_current_rms_a, double source_resistance_ohm,
                                  std::string_view run);

/// RMS from an average-responding meter, which shows mean-rectified times 1.1107 (a sine's form factor pi /
/// (2 sqrt 2)).
/// form_factor  RMS / mean-rectified of this waveform, from a capture; at least 1, as for every waveform
/// Errors:      refused for less, and for numbers that are not finite.
[[nodiscard]] Quoted rms_from_average_responding(const Estimate& shown, const Estimate& form_factor);

/// By how much an undeclared lead resistance would move a port's power.
struct LeadEffect {
  double power_w = 0;    ///< I^2 R
  double relative = 0;   ///< of V I
  bool matters = false;  ///< above 0.1 %
};

inline constexpr double kLeadOhm = 0.010;
inline constexpr double kLeadMatters = 0.001;

/// voltage_v, current_a  magnitudes, RMS on AC. Zero voltage with current: relative is 1, it matters. No
/// effect where a number is not finite: then there is nothing to move.
[[nodiscard]] LeadEffect lead_effect(double voltage_v, double current_a, double lead_ohm = kLeadOhm);

/// What `check` says of a port whose sensing is undeclared and whose leads would matter; nullopt where all is
/// well.
[[nodiscard]] std::optional<std::string> lead_remark(const Port& port, double voltage_v, double current_a);

}  // namespace loadstair::efficiency
