// A bank of equal incandescent lamps whose filaments warm up: the resistance follows the temperature.
#pragma once

#include <vector>

namespace loadstair::rehearsal {

struct LampParameters {
  int count = 0;
  double rated_power_w = 100.0;
  double rated_voltage_v = 230.0;
  double cold_ratio =
      1.0 / 12.0;          ///< cold resistance over hot resistance (about 1/12: common practice, no source)
  double warm_up_s = 0.1;  ///< heat from cold to hot, over rated power
  double hot_k = 2800.0;   ///< filament at rated voltage
};

/// Filament: resistance ~ T^k with k from the cold ratio; radiates ~ T^4 less what the room sends back.
class LampBank {
 public:
  LampBank(const LampParameters& parameters, double room_c);

  /// Sum of the conductances of the first `lit` lamps, in siemens, as hot as they are now.
  [[nodiscard]] double conductance_s(int lit) const;
  /// Advances all filaments by `length_s`: the first `lit` lamps at `voltage_v` rms, the others dark.
  void advance(double length_s, double voltage_v, int lit);
  /// Filament temperature of lamp `index`, in kelvin.
  [[nodiscard]] double filament_k(int index) const { return filament_k_[static_cast<std::size_t>(index)]; }
  [[nodiscard]] int count() const { return parameters_.count; }

 private:
  [[nodiscard]] double resistance_ohm(double filament_k) const;
  [[nodiscard]] double advanced(double filament_k, double length_s, double voltage_v) const;

  LampParameters parameters_;
  double room_k_;
  double exponent_;
  std::vector<double> filament_k_;
};

}  // namespace loadstair::rehearsal
