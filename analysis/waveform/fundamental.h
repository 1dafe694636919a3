// The common fundamental and the window of whole cycles; private to this room.
#pragma once

#include <cstddef>

#include "analysis/base/outcome.h"
#include "analysis/waveform/prepare.h"
#include "analysis/waveform/span_sum.h"

namespace loadstair::waveform {

/// A fundamental in cycles per sample.
struct FoundFundamental {
  double frequency = 0.0;
  double standard_uncertainty = 0.0;
  double share = 0.0;  ///< of the alternating power
};

/// The largest line between low and high (cycles per sample), by DFT, four-parameter fit (both on block means
/// where the record is long), then by the slope of the fundamental's phase from cycle to cycle over all
/// samples: over whole cycles the harmonics drop out of it, so that a distorted wave does not pull the
/// frequency.
base::Outcome<FoundFundamental> find_fundamental(const Prepared& channel, double low, double high);

/// Frequency of a stretch of whole cycles by the slope of the fundamental's phase.
struct LocalFrequency {
  double frequency = 0.0;             ///< cycles per sample
  double standard_uncertainty = 0.0;  ///< from the scatter of the phase; 0 below 3 cycles
};
/// begin, period   in samples; the stretch of `cycles` (2 or more) periods must lie within [-1, samples]
LocalFrequency local_frequency(const Prepared& channel, double begin, double period, int cycles);

/// The whole cycles of a record, ends snapped to samples where the frequency's uncertainty allows it.
struct CycleWindow {
  SpanSum span;
  int cycles = 0;
  double period = 0.0;  ///< samples per cycle, consistent with the span
  bool coherent = false;
};
CycleWindow whole_cycles(const FoundFundamental& fundamental, std::size_t samples);

}  // namespace loadstair::waveform
