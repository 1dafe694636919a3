// Tables behind the thermocouple functions; private to this room.
#pragma once

#include <cstddef>
#include <span>

#include "analysis/sensors/sensors.h"

namespace loadstair::sensors::its90 {

/// emf in mV = sum c_i t^i over [low, high] degC.
struct DirectPiece {
  double low_degc;
  double high_degc;
  std::span<const double> coefficients;
};

/// t in degC = sum d_i emf^i over [low, high] mV.
struct InversePiece {
  double low_mv;
  double high_mv;
  std::span<const double> coefficients;
};

struct Reference {
  char letter;
  std::span<const DirectPiece> direct;
  std::span<const InversePiece> inverse;
};

const Reference& reference(Thermocouple type);

/// Type K above 0 degC adds kA0 exp(kA1 (t - kA2)^2), mV.
inline constexpr double kA0 = 0.1185976;
inline constexpr double kA1 = -0.0001183432;
inline constexpr double kA2 = 126.9686;

}  // namespace loadstair::sensors::its90
