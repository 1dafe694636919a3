// Results of one channel over a window; private to this room.
#pragma once

#include <complex>
#include <vector>

#include "analysis/base/outcome.h"
#include "analysis/waveform/fundamental.h"
#include "analysis/waveform/prepare.h"
#include "analysis/waveform/waveform.h"

namespace loadstair::waveform {

/// A channel's results and what the powers need of it.
struct ChannelAnalysis {
  ChannelResult result;
  std::vector<std::complex<double>> lines;  ///< amplitudes of orders 1 .., the channel's delay taken out
};

/// window.cycles = 0: a direct record. interval_s is the samples' interval.
ChannelAnalysis analyse_channel(const Channel& channel, const Prepared& prepared, const CycleWindow& window,
                                const base::Outcome<std::vector<GroupWindow>>& windows, double interval_s,
                                const AnalysisSettings& settings);

/// Median over cycles of the per-cycle peak, over the RMS, of the signal limited to band_hz.
base::Outcome<Bounded> crest_factor_in_band(const Prepared& prepared, const CycleWindow& window,
                                            double interval_s, double band_hz);

/// The windows of 10 or 12 whole cycles, one after the other, each as long as its own frequency asks for
/// where the record can tell it from the whole record's. reference: the channel whose fundamental is the
/// common one.
base::Outcome<std::vector<GroupWindow>> group_windows(const Prepared& reference, const CycleWindow& window,
                                                      double interval_s);

/// IEC 61000-4-7:2002 + A1:2008 clauses 5.5 and 5.6 over every window.
base::Outcome<GroupedHarmonics> group_harmonics(const Prepared& prepared,
                                                const base::Outcome<std::vector<GroupWindow>>& windows,
                                                double interval_s, int orders);

/// Mean, RMS, rectified mean, extremes, crest and form factor over the window; steps of the converter.
void set_levels(ChannelResult& out, const Prepared& x, const CycleWindow& window);

/// Median; the span is reordered. Precondition: not empty.
double median(std::vector<double>& values);

/// Fewer samples than this on one crest (half a cycle) leave its peak unseen.
inline constexpr double kLeastSamplesPerCrest = 20.0;

}  // namespace loadstair::waveform
