// Two thermal nodes and a fan: the junction (board) heated by the loss, the case (heatsink) between it and
// the air.
#pragma once

#include <array>

namespace loadstair::rehearsal {

struct ThermalParameters {
  double junction_to_case_k_per_w = 0.6;
  double case_to_air_k_per_w = 1.8;      ///< fan standing
  double case_to_air_fan_k_per_w = 0.9;  ///< fan running
  double junction_time_s = 40.0;         ///< junction_to_case times the junction's capacity
  double case_time_s = 600.0;            ///< case_to_air (fan standing) times the case's capacity
  double fan_starts_c = 60.0;            ///< case temperature
  double fan_stops_c = 50.0;
  double fan_power_w = 0.0;  ///< adds to the loss while it runs (taken from the converter's input)
};

struct ThermalState {
  double junction_c = 25.0;
  double case_c = 25.0;
};

class TwoNodes {
 public:
  /// Starts at `start_c` everywhere.
  TwoNodes(const ThermalParameters& parameters, double start_c);

  /// Advances by `length_s` with `heat_w` into the junction and air at `ambient_c`: exact for constant heat.
  void advance(double length_s, double heat_w, double ambient_c);
  [[nodiscard]] const ThermalState& state() const { return state_; }
  [[nodiscard]] bool fan_on() const { return fan_on_; }
  /// Where the nodes end for constant heat, with the fan as it is.
  [[nodiscard]] ThermalState steady(double heat_w, double ambient_c) const;
  /// The two time constants, the shorter first, with the fan as it is.
  [[nodiscard]] std::array<double, 2> time_constants_s() const;

 private:
  void prepare(double length_s);

  ThermalParameters parameters_;
  ThermalState state_;
  bool fan_on_ = false;
  bool prepared_ = false;
  double prepared_length_s_ = 0.0;
  std::array<double, 4> transition_{};  ///< exp(A t), row by row
};

}  // namespace loadstair::rehearsal
