// Delay between two channels, measured with both probes on one resistive signal.
#pragma once

#include <string>
#include <vector>

#include "analysis/base/outcome.h"
#include "analysis/waveform/waveform.h"

namespace loadstair::waveform {

/// What one order says of the delay.
struct DelayOfOrder {
  int order = 0;
  double delay_s = 0.0;  ///< phase of the voltage less that of the current over 2 pi f, mean over cycles
  double standard_uncertainty_s = 0.0;
};

struct Deskew {
  double delay_s = 0.0;  ///< how late the current channel comes; what CaptureSource and Channel::delay_s take
  double standard_uncertainty_s = 0.0;
  double degrees_of_freedom = 0.0;
  double half_width_s = 0.0;  ///< 95 %, Student's t: the tolerance to declare
  double type_a_s = 0.0;      ///< part of the uncertainty: scatter over cycles
  double model_s = 0.0;       ///< part of it: orders that disagree with one delay
  int cycles = 0;
  std::vector<DelayOfOrder> orders;  ///< those that were used
  std::vector<std::string> remarks;  ///< orders that disagree: what that points to
};

/// The delay of the current channel against the voltage channel in a record of a resistive load: both are
/// then in phase, and what phase is left, in the fundamental and in every harmonic that stands out in both
/// channels (1 % of the fundamental, ten times the noise), is delay. Per cycle one weighted least-squares
/// delay over the orders (weights by each order's noise); Type A from the scatter over cycles. Where a pure
/// delay does not explain the orders (beyond three standard uncertainties), the largest disagreement is added
/// as a rectangular half-width. Refuses: no voltage or current named; what analyse() refuses; fewer than 5
/// whole cycles; clipped channels; a current of reversed sign, or more than 30 degrees off: not one resistive
/// signal. Known delays of the channels are taken out first: the result is what is left.
base::Outcome<Deskew> measure_deskew(const Waveform& waveform, const AnalysisSettings& settings = {});

}  // namespace loadstair::waveform
