// Lines that need not be harmonics, and the groups around multiples of a switching carrier.
#pragma once

#include <cstddef>
#include <optional>
#include <span>
#include <vector>

#include "analysis/base/outcome.h"
#include "analysis/waveform/waveform.h"

namespace loadstair::waveform {

struct SpectralLine {
  double frequency_hz = 0.0;
  double rms = 0.0;
  double phase_deg = 0.0;    ///< of the cosine at the first sample; (-180, 180]
  bool below_floor = false;  ///< less than three times what noise gives such a line
};

/// Lines at any frequencies of one channel, from the largest span of whole cycles that analyse() would
/// choose. A frequency that falls on the span's own grid (to 0.01 of a line) is read without a window: exact
/// when all of the signal lies on the grid. Others are read through a Blackman-Harris window, exact where no
/// other line is nearer than 4 lines of the span (frequency_hz/cycles each) and to 92 dB elsewhere.
/// frequencies_hz   above zero, below half the sampling rate
/// Refuses: what analyse() refuses; a record without fundamental; frequencies out of range; a frequency off
/// the grid in a record of fewer than 9 cycles. Cost: samples times frequencies. Source: Harris 1978
/// (window).
base::Outcome<std::vector<SpectralLine>> lines_at(const Waveform& waveform, std::size_t channel,
                                                  std::span<const double> frequencies_hz,
                                                  const AnalysisSettings& settings = {});

struct CarrierSettings {
  double carrier_hz = 0.0;  ///< nominal; refined within `search_lines` of the record's spectrum
  int multiples = 4;  ///< groups around 1 .. this many times the carrier, as far as sampling resolves them
  int sidebands = 8;  ///< lines at n = -sidebands .. sidebands times the fundamental beside each
  double search_lines = 1.0;  ///< how far to look, in lines (1/record length); 0: taken as given
  /// Every sample is the mean of the signal over its interval (an integrating or area-sampled record): lines
  /// are divided by sin(x)/x of that mean.
  bool samples_are_means = false;
};

struct CarrierLine {
  int sideband = 0;  ///< n of m f_carrier + n f_1
  SpectralLine line;
};

struct CarrierGroup {
  int multiple = 0;  ///< m
  double centre_hz = 0.0;
  double rms = 0.0;  ///< of the lines above the floor together
  std::vector<CarrierLine> lines;
};

struct CarrierGroups {
  double carrier_hz = 0.0;  ///< as refined
  double ratio = 0.0;       ///< carrier over fundamental
  /// The ratio is whole, to what the record can tell: the lines are harmonics of high order, and the groups
  /// of neighbouring multiples fold into each other where sidebands reach that far.
  bool synchronous = false;
  std::vector<CarrierGroup> groups;
};

/// Groups of lines m f_carrier + n f_1 of a pulse-width modulated channel; their amplitudes by the double
/// Fourier series are those of Bennett 1933, Black 1953 (naturally sampled sine-triangle PWM). Refuses: what
/// lines_at() refuses; a carrier below 9 times the fundamental or above half the sampling rate; sidebands
/// that would reach half way to the next multiple.
base::Outcome<CarrierGroups> carrier_groups(const Waveform& waveform, std::size_t channel,
                                            const CarrierSettings& carrier,
                                            const AnalysisSettings& settings = {});

}  // namespace loadstair::waveform
