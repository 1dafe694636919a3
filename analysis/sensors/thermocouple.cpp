#include <algorithm>
#include <cmath>
#include <string>

#include "analysis/base/number.h"
#include "analysis/sensors/its90.h"
#include "analysis/sensors/sensors.h"

namespace loadstair::sensors {
namespace {

using base::Outcome;
using base::Refusal;

// Below this the emf of type B is not unique: it has a minimum near 21 degC and crosses zero near 42 degC.
constexpr double kLeastUniqueBDegc = 250.0;

/// Polynomial and derivative, highest power first (Horner).
Converted polynomial(std::span<const double> coefficients, double x) {
  Converted out;
  for (std::size_t i = coefficients.size(); i-- > 0;) {
    out.sensitivity = out.sensitivity * x + out.value;
    out.value = out.value * x + coefficients[i];
  }
  return out;
}

/// mV and mV/K within the direct range.
Converted emf_mv(Thermocouple type, double t) {
  const its90::Reference& table = its90::reference(type);
  const its90::DirectPiece* piece = &table.direct.back();
  for (const its90::DirectPiece& candidate : table.direct) {
    if (t <= candidate.high_degc) {
      piece = &candidate;
      break;
    }
  }
  Converted out = polynomial(piece->coefficients, t);
  if (type == Thermocouple::k && t > 0.0) {
    const double distance = t - its90::kA2;
    const double bump = its90::kA0 * std::exp(its90::kA1 * distance * distance);
    out.value += bump;
    out.sensitivity += 2.0 * its90::kA1 * distance * bump;
  }
  return out;
}

std::string name_of(Thermocouple type) {
  return std::string{"thermocouple type "} + letter_of(type);
}

Refusal outside(Thermocouple type, const std::string& what, double low, double high, const char* unit) {
  return {name_of(type), what + " is outside " + base::print_significant(low, 6) + " to " +
                             base::print_significant(high, 6) + " " + unit +
                             "; check the sensor, its polarity and type"};
}

}  // namespace

base::Outcome<Thermocouple> parse_thermocouple(std::string_view letter) {
  if (letter.size() == 1) {
    const char upper =
        letter[0] >= 'a' && letter[0] <= 'z' ? static_cast<char>(letter[0] - 'a' + 'A') : letter[0];
    for (int i = 0; i < 8; ++i) {
      const auto type = static_cast<Thermocouple>(i);
      if (its90::reference(type).letter == upper) return type;
    }
  }
  return Refusal{"thermocouple type", "\"" + std::string{letter} + "\" is not one of B, E, J, K, N, R, S, T"};
}

char letter_of(Thermocouple type) {
  return its90::reference(type).letter;
}

TemperatureRange direct_range(Thermocouple type) {
  const its90::Reference& table = its90::reference(type);
  return {table.direct.front().low_degc, table.direct.back().high_degc};
}

TemperatureRange inverse_range(Thermocouple type) {
  TemperatureRange range = direct_range(type);
  if (type == Thermocouple::b) range.low_degc = kLeastUniqueBDegc;
  return range;
}

base::Outcome<Converted> thermocouple_emf(Thermocouple type, double temperature_degc) {
  const TemperatureRange range = direct_range(type);
  if (!(temperature_degc >= range.low_degc && temperature_degc <= range.high_degc)) {
    return outside(type, base::print_significant(temperature_degc, 6) + " degC", range.low_degc,
                   range.high_degc, "degC");
  }
  const Converted mv = emf_mv(type, temperature_degc);
  return Converted{mv.value * 1e-3, mv.sensitivity * 1e-3};
}

base::Outcome<JunctionTemperature> thermocouple_temperature(Thermocouple type, double emf_v,
                                                            double cold_junction_degc) {
  const Outcome<Converted> cold = thermocouple_emf(type, cold_junction_degc);
  if (!cold) return Refusal{cold.refusal().place, "cold junction: " + cold.refusal().reason};
  double target_mv = emf_v * 1e3 + cold->value * 1e3;
  const TemperatureRange range = inverse_range(type);
  double low = range.low_degc;
  double high = range.high_degc;
  const double low_mv = emf_mv(type, low).value;
  const double high_mv = emf_mv(type, high).value;
  // A temperature at the very end of the range survives the rounding of its own emf.
  constexpr double kRoundingMv = 1e-12;
  if (target_mv < low_mv && target_mv > low_mv - kRoundingMv) target_mv = low_mv;
  if (target_mv > high_mv && target_mv < high_mv + kRoundingMv) target_mv = high_mv;
  if (!(target_mv >= low_mv && target_mv <= high_mv)) {
    return outside(type, base::print_significant(target_mv, 6) + " mV against 0 degC", low_mv, high_mv, "mV");
  }
  // Newton, kept inside a shrinking bracket: the emf rises over the whole range.
  double t = low + (high - low) * (target_mv - low_mv) / (high_mv - low_mv);
  Converted at = emf_mv(type, t);
  for (int i = 0; i < 100; ++i) {
    (at.value > target_mv ? high : low) = t;
    double next = t - (at.value - target_mv) / at.sensitivity;
    if (!(next >= low && next <= high)) next = 0.5 * (low + high);
    const double step = std::abs(next - t);
    t = next;
    at = emf_mv(type, t);
    if (step < 1e-10) break;
  }
  const double per_mv = 1.0 / at.sensitivity;
  return JunctionTemperature{t, per_mv * 1e3, cold->sensitivity * 1e3 * per_mv};
}

base::Outcome<double> thermocouple_temperature_approximate(Thermocouple type, double emf_v) {
  const its90::Reference& table = its90::reference(type);
  const double mv = emf_v * 1e3;
  if (!(mv >= table.inverse.front().low_mv && mv <= table.inverse.back().high_mv)) {
    return outside(type, base::print_significant(mv, 6) + " mV", table.inverse.front().low_mv,
                   table.inverse.back().high_mv, "mV");
  }
  for (const its90::InversePiece& piece : table.inverse) {
    if (mv <= piece.high_mv) return polynomial(piece.coefficients, mv).value;
  }
  return polynomial(table.inverse.back().coefficients, mv).value;
}

namespace {

/// max(absolute_k, relative * |t|) over [low, high]; for class 1 of R and S above 1100 degC the relative part
/// counts from there.
struct ToleranceRow {
  char letter;
  int tolerance_class;
  double low_degc, high_degc;
  double absolute_k, relative;
};

constexpr ToleranceRow kTolerances[] = {
    {'T', 1, -40, 350, 0.5, 0.004},   {'T', 2, -40, 350, 1.0, 0.0075}, {'T', 3, -200, 40, 1.0, 0.015},
    {'E', 1, -40, 800, 1.5, 0.004},   {'E', 2, -40, 900, 2.5, 0.0075}, {'E', 3, -200, 40, 2.5, 0.015},
    {'J', 1, -40, 750, 1.5, 0.004},   {'J', 2, -40, 750, 2.5, 0.0075}, {'K', 1, -40, 1000, 1.5, 0.004},
    {'K', 2, -40, 1200, 2.5, 0.0075}, {'K', 3, -200, 40, 2.5, 0.015},  {'N', 1, -40, 1000, 1.5, 0.004},
    {'N', 2, -40, 1200, 2.5, 0.0075}, {'N', 3, -200, 40, 2.5, 0.015},  {'R', 1, 0, 1600, 1.0, 0.003},
    {'R', 2, 0, 1600, 1.5, 0.0025},   {'S', 1, 0, 1600, 1.0, 0.003},   {'S', 2, 0, 1600, 1.5, 0.0025},
    {'B', 2, 600, 1700, 0.0, 0.0025}, {'B', 3, 600, 1700, 4.0, 0.005},
};

constexpr double kClass1NobleKneeDegc = 1100.0;

}  // namespace

base::Outcome<double> thermocouple_tolerance_k(Thermocouple type, int tolerance_class,
                                               double temperature_degc) {
  const char letter = letter_of(type);
  for (const ToleranceRow& row : kTolerances) {
    if (row.letter != letter || row.tolerance_class != tolerance_class) continue;
    if (!(temperature_degc >= row.low_degc && temperature_degc <= row.high_degc)) {
      return outside(type,
                     "class " + base::print_integer(tolerance_class) + " at " +
                         base::print_significant(temperature_degc, 6) + " degC",
                     row.low_degc, row.high_degc, "degC");
    }
    if (tolerance_class == 1 && (letter == 'R' || letter == 'S')) {
      return row.absolute_k + row.relative * std::max(0.0, temperature_degc - kClass1NobleKneeDegc);
    }
    return std::max(row.absolute_k, row.relative * std::abs(temperature_degc));
  }
  return Refusal{name_of(type),
                 "IEC 60584-1 defines no class " + base::print_integer(tolerance_class) + " for it"};
}

}  // namespace loadstair::sensors
