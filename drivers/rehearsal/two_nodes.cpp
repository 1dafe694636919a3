#include "drivers/rehearsal/two_nodes.h"

#include <cmath>

namespace loadstair::rehearsal {

namespace {

// d/dt (junction, case) = A (junction - its end, case - its end).
struct Rates {
  double a;  // junction to case, seen by the junction
  double b;  // the same, seen by the case
  double c;  // case to air
};

Rates rates(const ThermalParameters& p, bool fan_on) {
  const double case_capacity = p.case_time_s / p.case_to_air_k_per_w;
  const double to_air = fan_on ? p.case_to_air_fan_k_per_w : p.case_to_air_k_per_w;
  return {1.0 / p.junction_time_s, 1.0 / (p.junction_to_case_k_per_w * case_capacity),
          1.0 / (to_air * case_capacity)};
}

std::array<double, 2> eigenvalues(const Rates& r) {
  const double trace = -(r.a + r.b + r.c);
  const double determinant = r.a * r.c;
  const double root = std::sqrt(trace * trace - 4.0 * determinant);  // real: off-diagonals have one sign
  const double fast = 0.5 * (trace - root);
  return {fast, determinant / fast};
}

}  // namespace

TwoNodes::TwoNodes(const ThermalParameters& parameters, double start_c)
    : parameters_{parameters}, state_{start_c, start_c} {}

void TwoNodes::prepare(double length_s) {
  const Rates r = rates(parameters_, fan_on_);
  const auto [fast, slow] = eigenvalues(r);
  const double e_fast = std::exp(fast * length_s);
  const double e_slow = std::exp(slow * length_s);
  const double scale = 1.0 / (fast - slow);
  const std::array<double, 4> a = {-r.a, r.a, r.b, -(r.b + r.c)};
  for (std::size_t i = 0; i < 4; ++i) {
    const double unit = (i == 0 || i == 3) ? 1.0 : 0.0;
    transition_[i] = scale * (e_fast * (a[i] - slow * unit) - e_slow * (a[i] - fast * unit));
  }
  prepared_length_s_ = length_s;
  prepared_ = true;
}

void TwoNodes::advance(double length_s, double heat_w, double ambient_c) {
  if (!prepared_ || prepared_length_s_ != length_s) prepare(length_s);
  const ThermalState end = steady(heat_w, ambient_c);
  const double junction = state_.junction_c - end.junction_c;
  const double heatsink = state_.case_c - end.case_c;
  state_.junction_c = end.junction_c + transition_[0] * junction + transition_[1] * heatsink;
  state_.case_c = end.case_c + transition_[2] * junction + transition_[3] * heatsink;
  const double turns_at = fan_on_ ? parameters_.fan_stops_c : parameters_.fan_starts_c;
  const bool on = fan_on_ ? state_.case_c > turns_at : state_.case_c >= turns_at;
  if (on != fan_on_) {
    fan_on_ = on;
    prepared_ = false;
  }
}

ThermalState TwoNodes::steady(double heat_w, double ambient_c) const {
  const double to_air = fan_on_ ? parameters_.case_to_air_fan_k_per_w : parameters_.case_to_air_k_per_w;
  const double heatsink = ambient_c + heat_w * to_air;
  return {heatsink + heat_w * parameters_.junction_to_case_k_per_w, heatsink};
}

std::array<double, 2> TwoNodes::time_constants_s() const {
  const auto [fast, slow] = eigenvalues(rates(parameters_, fan_on_));
  return {-1.0 / fast, -1.0 / slow};
}

}  // namespace loadstair::rehearsal
