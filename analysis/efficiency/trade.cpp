#include "analysis/efficiency/trade.h"

#include <cmath>
#include <numbers>

namespace loadstair::efficiency {

estimate::Quoted trip_current(const estimate::Estimate& threshold_v, const estimate::Estimate& resistor_ohm,
                              Sense sense, const WaveShape& shape) {
  if (!(resistor_ohm.value() > 0))
    return base::Refusal{"trip current", "the sense resistor is not above zero"};
  const estimate::Estimate current = threshold_v / resistor_ohm;
  switch (sense) {
    case Sense::rms:
      return current;
    case Sense::peak:
      return estimate::ratio(current, shape.crest_factor, "trip current");
    case Sense::average:
      return current * shape.form_factor;
  }
  return base::Refusal{"trip current", "the kind of sensing is not known"};
}

double least_dc_bus_v(double voltage_rms_v) {
  return std::numbers::sqrt2 * std::abs(voltage_rms_v);
}

}  // namespace loadstair::efficiency
