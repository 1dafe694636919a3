#include "analysis/efficiency/trade.h"

#include <cmath>
#include <numbers>

namespace loadstair::efficiency {

namespace {

bool is_finite(const estimate::Estimate& of) {
  return std::isfinite(of.value()) && std::isfinite(of.variance());
}

estimate::Quoted current_of(const estimate::Estimate& threshold_v, const estimate::Estimate& resistor_ohm,
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

}  // namespace

estimate::Quoted trip_current(const estimate::Estimate& threshold_v, const estimate::Estimate& resistor_ohm,
                              Sense sense, const WaveShape& shape) {
  const estimate::Quoted found = current_of(threshold_v, resistor_ohm, sense, shape);
  if (found && !is_finite(*found))
    return base::Refusal{"trip current", "threshold, resistor or waveform is not a finite number"};
  return found;
}

base::Outcome<double> least_dc_bus_v(double voltage_rms_v) {
  if (!(voltage_rms_v >= 0) || !std::isfinite(voltage_rms_v))
    return base::Refusal{"least DC bus", "the output voltage is below zero or not finite"};
  return std::numbers::sqrt2 * voltage_rms_v;
}

}  // namespace loadstair::efficiency
