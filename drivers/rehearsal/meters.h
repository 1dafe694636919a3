// Rehearsed meters: what a real one would show, with errors drawn inside its declared specification.
// A conversion is a function of (seed, run, meter, number of the conversion, plant): asking costs, waiting
// does not.
#pragma once

#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "drivers/rehearsal/history.h"
#include "drivers/rehearsal/plant.h"

namespace loadstair::rehearsal {

enum class Port { input, output };

enum class Quantity {
  voltage,
  current,
  power,         ///< active: wattmeter only, from the voltage node and the ammeter's current
  power_factor,  ///< power over the product of the shown voltage and current
  frequency,
  case_temperature,
  junction_temperature,
  ambient_temperature,
};

/// How a meter turns a waveform into a number.
enum class Response {
  dc,
  true_rms_ac,  ///< without the DC component
  true_rms_ac_dc,
  average_responding,  ///< mean of the rectified AC part times 1.1107, right for a sine only
};

/// One range with its declared specification: +-(reading_percent + range_percent of full scale + digits).
struct MeterRange {
  double full_scale = 0.0;  ///< in the function's unit (V at a shunt)
  double digit = 0.0;       ///< value of the last digit; 0: not rounded
  double reading_percent = 0.0;
  double range_percent = 0.0;
  double digits = 0.0;      ///< as declared; 0.5 of them is the rounding itself
  double burden_ohm = 0.0;  ///< of an ammeter on this range, with its fuse
};

/// A shunt in series; the meter on it reads volts.
struct Shunt {
  double resistance_ohm = 0.1;
  double tolerance_percent = 0.0;  ///< the true one is drawn inside
  double tempco_ppm_per_k = 0.0;   ///< of the resistance, from ambient on
  double rise_k_per_w = 0.0;       ///< self-heating
};

/// How many times its cold resistance a shunt R has at a mean square current: it is heated by the power in
/// its hot resistance, so k = 1 + alpha theta k R i^2, k = 1 / (1 - alpha theta R i^2). At most 10: it would
/// have burnt.
[[nodiscard]] double warming(const Shunt& shunt, double cold_ohm, double mean_square_a2);

/// A temperature sensor that is read as resistance; its own error is drawn once, within
/// +-(tolerance_k + tolerance_per_k * |t|), t in degC.
struct ResistanceSensor {
  /// Platinum: r0 (1 + A t + B t^2 + C (t - 100) t^3, the last below 0), IEC 60751. 0: a thermistor
  double r0_ohm = 0.0;
  double r25_ohm = 0.0, beta_k = 0.0;  ///< thermistor: r25 exp(beta (1/T - 1/298.15)), T in K
  double a = 0.0, b = 0.0, c = 0.0;    ///< where r25_ohm is 0: 1/T = a + b ln R + c (ln R)^3
  double lead_ohm = 0.0;               ///< in series with it
  double tolerance_k = 0.0, tolerance_per_k = 0.0;
};
/// What a sensor without error has at a temperature in degC, leads included.
[[nodiscard]] double resistance_at(const ResistanceSensor& sensor, double celsius);

/// One thing a meter can show.
struct MeterFunction {
  std::string name;  ///< "voltage", "reading", "heatsink": queries, lines and typed questions use it
  Quantity quantity = Quantity::voltage;
  Port port = Port::input;
  Node node = Node::inner;  ///< where the voltage circuit sits
  Response response = Response::dc;
  std::vector<MeterRange> ranges;         ///< rising full scale; empty: exact (never for a test of intervals)
  int fixed_range = -1;                   ///< index, or -1: the smallest range that holds the reading
  double noise = 0.0;                     ///< standard deviation of one conversion, in the unit
  double impedance_ohm = 0.0;             ///< of a voltage circuit; 0: infinite
  double burden_tolerance_percent = 0.0;  ///< of burden_ohm and impedance_ohm, the true ones are drawn inside
  std::optional<Shunt> shunt;             ///< for a current: the meter reads the voltage across it
  std::optional<ResistanceSensor> sensor;  ///< for a temperature: the meter reads ohms
  double scale = 1.0;                      ///< what is measured over what the meter sees (a divider, a clamp)
  double scale_tolerance_percent = 0.0;    ///< the true one is drawn inside
  double nonlinearity_percent = 0.0;  ///< beyond the specification: a sine over the range, % of full scale
};

struct MeterDescription {
  std::string name;
  std::vector<MeterFunction> functions;
  double update_period_s = 0.0;  ///< free-running conversions; 0: a conversion for each query
  double integration_s = 0.1;
  double delay_s = 0.0;  ///< from the end of integration until the value can be read
  /// A wattmeter's power is made by its voltage and its current circuit: the gain error of the power is the
  /// sum of theirs and, where its specification leaves room, a part of its own; scaled down where theirs
  /// together would be more than the power's specification promises. False: drawn by itself.
  bool power_from_circuits = false;
};

/// Where a function's circuit is connected; at first as described.
struct Wiring {
  Quantity quantity = Quantity::voltage;
  Port port = Port::input;
  Node node = Node::inner;
  bool shorted = false;  ///< its input terminals: it sees nothing and shows its own zero
};

/// What the display shows.
struct Shown {
  double value = 0.0;
  double full_scale = 0.0;
  double digit = 0.0;
  bool overload = false;
};

/// Errors of one function on one range, as drawn. |gain| <= reading % and |offset| <= range % + digits - 0.5
/// digit, so that reading plus rounding stays inside the declared specification. Each of the two is a
/// rectangular draw u = 2 F(z) - 1 with z = sqrt(.8) fixed + sqrt(.1) run + sqrt(.1) level, standard normals,
/// F their distribution: exactly rectangular, with the shares fixed, per run and per level.
struct DrawnError {
  double gain = 0.0;    ///< relative
  double offset = 0.0;  ///< in the unit
};

/// Places after the point that show the last digit: 1 for 0.1, 0 for 1; 6 when nothing is rounded.
[[nodiscard]] int decimals_of(double digit);

class Meter {
 public:
  /// `seed`: which bench; `run`: which visit to it (redraws the run share).
  Meter(MeterDescription description, std::uint64_t seed, std::uint64_t run);

  [[nodiscard]] const MeterDescription& description() const { return description_; }
  [[nodiscard]] const Wiring& wiring(std::size_t function) const { return wiring_[function]; }
  void wire(std::size_t function, const Wiring& wiring) { wiring_[function] = wiring; }
  void restore_wiring();
  /// Index of a function by name; nullopt when there is none.
  [[nodiscard]] std::optional<std::size_t> find(const std::string& function) const;

  /// The number of the last conversion that can be read at `time_s`, and the end of its integration.
  [[nodiscard]] std::int64_t conversion_at(double time_s) const;
  [[nodiscard]] double conversion_end_s(std::int64_t conversion) const;
  /// What stands on the display at `time_s` for each function. The history must reach back over integration,
  /// update period and delay.
  [[nodiscard]] std::vector<Shown> shown(const History& history, double time_s) const;

  /// The error drawn for a true value on a range.
  [[nodiscard]] DrawnError error(std::size_t function, std::size_t range, double value) const;
  /// The true series resistance (shunt or burden) and the true conductance of the voltage circuit.
  [[nodiscard]] double series_ohm(std::size_t function, std::size_t range) const;
  [[nodiscard]] double parallel_siemens(std::size_t function) const;
  /// The range the function would stand on for a value; nullopt: overload.
  [[nodiscard]] std::optional<std::size_t> range_for(std::size_t function, double magnitude) const;

 private:
  [[nodiscard]] double true_value(std::size_t function, const StepMeans& means) const;
  /// As it arrives at the meter's terminals: through the shunt or the sensor, over the scale.
  [[nodiscard]] double seen_value(std::size_t function, const StepMeans& means) const;
  [[nodiscard]] double sensor_ohm(std::size_t function, double celsius) const;
  /// Of a power that its circuits make; nullopt: drawn by itself.
  [[nodiscard]] std::optional<double> circuits_gain(std::size_t power, const StepMeans& means) const;
  /// Of a shunt as warm as the current makes it; 1 where the meter reads amperes.
  [[nodiscard]] double volts_per_ampere(std::size_t function, const SignalMeans& current) const;
  /// gain  nullopt: as drawn for the function by itself
  [[nodiscard]] Shown show(std::size_t function, double value, std::int64_t conversion,
                           std::optional<double> gain) const;

  MeterDescription description_;
  std::vector<Wiring> wiring_;  ///< by function
  std::uint64_t seed_;
  std::uint64_t run_;
  double phase_s_ = 0.0;  ///< of the free-running conversions
};

}  // namespace loadstair::rehearsal
