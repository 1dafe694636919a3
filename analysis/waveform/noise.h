// Noise of a record from what lies between its lines; private to this room.
#pragma once

#include <complex>
#include <vector>

#include "analysis/waveform/fundamental.h"
#include "analysis/waveform/prepare.h"

namespace loadstair::waveform {

struct Noise {
  double rms = 0.0;  ///< over the whole band
  double line_rms =
      0.0;  ///< what noise gives a single line in the band of the harmonics: s sqrt(2/L) when white
};

/// Medians of a Hann-windowed transform between the harmonics, over ln 2 (the median of an exponential
/// variate), block by block: lines that are there, a carrier's among them, hardly move a median. Steps of
/// size `step` that no noise spreads give every harmonic its share of step^2/12. lines         amplitudes of
/// the harmonics, taken out first where whole cycles do not end on samples residual_rms  taken instead where
/// fewer than two cycles leave nothing between the harmonics
Noise noise_of(const Prepared& channel, const CycleWindow& window, double mean,
               const std::vector<std::complex<double>>& lines, double residual_rms, double step);

/// RMS of second differences over sqrt 6: of white noise its RMS, whatever moves slowly beneath. 3 samples or
/// more.
double noise_of_direct(const Prepared& channel);

/// Steps of a converter seen in samples [first, past), in the samples' own unit.
struct Steps {
  double step = 0.0;  ///< of the lattice that all samples lie on; 0: they lie on none, or are all equal
  int levels = 0;     ///< different values, counted to 4
};
/// Looks at the first 65536 samples of the range. Precondition: first < past.
Steps steps_of(const Prepared& channel, std::size_t first, std::size_t past);

}  // namespace loadstair::waveform
