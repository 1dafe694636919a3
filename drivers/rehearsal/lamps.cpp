#include "drivers/rehearsal/lamps.h"

#include <algorithm>
#include <cmath>
#include <cstddef>

namespace loadstair::rehearsal {

namespace {
constexpr double kZeroCelsius_k = 273.15;

double fourth(double x) {
  return (x * x) * (x * x);
}
}  // namespace

LampBank::LampBank(const LampParameters& parameters, double room_c)
    : parameters_{parameters},
      room_k_{room_c + kZeroCelsius_k},
      exponent_{-std::log(parameters.cold_ratio) / std::log(parameters.hot_k / room_k_)},
      filament_k_(static_cast<std::size_t>(std::max(parameters.count, 0)), room_k_) {}

double LampBank::resistance_ohm(double filament_k) const {
  const double hot = parameters_.rated_voltage_v * parameters_.rated_voltage_v / parameters_.rated_power_w;
  return hot * std::pow(filament_k / parameters_.hot_k, exponent_);
}

double LampBank::conductance_s(int lit) const {
  double sum = 0.0;
  const int last = std::min(lit, parameters_.count);
  for (int i = 0; i < last; ++i) sum += 1.0 / resistance_ohm(filament_k_[static_cast<std::size_t>(i)]);
  return sum;
}

double LampBank::advanced(double filament_k, double length_s, double voltage_v) const {
  const double capacity = parameters_.rated_power_w * parameters_.warm_up_s / (parameters_.hot_k - room_k_);
  const double radiation = parameters_.rated_power_w / (fourth(parameters_.hot_k) - fourth(room_k_));
  // Steps far below the shortest time constant of a hot filament, (hot - room) / (4 hot) of the warm-up time.
  const double longest_s = 0.05 * parameters_.warm_up_s;
  const int parts = std::max(1, static_cast<int>(std::ceil(length_s / longest_s)));
  const double part_s = length_s / parts;
  for (int i = 0; i < parts; ++i) {
    const double heat = voltage_v * voltage_v / resistance_ohm(filament_k);
    const double net = heat - radiation * (fourth(filament_k) - fourth(room_k_));
    if (std::abs(net) < 1e-9 * parameters_.rated_power_w) break;
    filament_k += part_s * net / capacity;
  }
  return filament_k;
}

void LampBank::advance(double length_s, double voltage_v, int lit) {
  double before = -1.0;
  double after = -1.0;
  bool lit_before = false;
  for (std::size_t i = 0; i < filament_k_.size(); ++i) {
    const bool is_lit = static_cast<int>(i) < lit;
    if (!is_lit && filament_k_[i] == room_k_) continue;
    // Lamps that share their past share their future: one computation for all of them.
    if (filament_k_[i] != before || is_lit != lit_before) {
      before = filament_k_[i];
      lit_before = is_lit;
      after = advanced(before, length_s, is_lit ? voltage_v : 0.0);
      if (!is_lit && after - room_k_ < 0.01) after = room_k_;
    }
    filament_k_[i] = after;
  }
}

}  // namespace loadstair::rehearsal
