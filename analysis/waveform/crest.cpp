#include <algorithm>
#include <cmath>
#include <complex>
#include <cstddef>
#include <utility>
#include <vector>

#include "analysis/base/number.h"
#include "analysis/waveform/channel.h"
#include "analysis/waveform/lines.h"
#include "analysis/waveform/transform.h"

namespace loadstair::waveform {

using base::Refusal;

base::Outcome<Bounded> crest_factor_in_band(const Prepared& prepared, const CycleWindow& window,
                                            double interval_s, double band_hz) {
  if (window.period < 2.0 * kLeastSamplesPerCrest) {
    return Refusal{"crest factor", base::print_fixed(window.period / 2.0, 1) +
                                       " samples on a crest; the peak needs 20: sample faster"};
  }
  const double frequency_hz = 1.0 / (window.period * interval_s);
  if (!(band_hz >= frequency_hz)) return Refusal{"crest factor", "its band ends below the fundamental"};
  const std::size_t count = window.coherent
                                ? window.span.past - window.span.first
                                : good_size(static_cast<std::size_t>(std::ceil(window.span.length())));
  auto spectrum = real_transform(
      count, [&](double* into) { resample(prepared, window.span.begin, window.span.length(), count, into); });
  const double line_hz = frequency_hz / window.cycles;
  std::size_t past_band = 0;
  // A line on the band's end belongs to it, rounding or not.
  while (past_band < spectrum.size() && static_cast<double>(past_band) * line_hz <= band_hz * (1.0 + 1e-9)) {
    ++past_band;
  }
  std::fill(spectrum.begin() + static_cast<std::ptrdiff_t>(past_band), spectrum.end(), 0.0);
  // Peaks fall between samples: 16 points or more on the shortest period of the band (1.9 % of that line at
  // most).
  constexpr std::size_t kFinest = 16;
  const std::size_t finer = std::max<std::size_t>(1, (kFinest * (past_band - 1) + count - 1) / count);
  std::vector<std::complex<double>> fine(count * finer / 2 + 1);
  std::copy(spectrum.begin(), spectrum.begin() + static_cast<std::ptrdiff_t>(past_band), fine.begin());
  // The last line of an even transform stands for both signs of its frequency; among more lines it is one of
  // two.
  if (finer > 1 && count % 2 == 0 && past_band == spectrum.size()) fine[count / 2] *= 0.5;
  std::vector<double> limited = real_inverse(std::move(fine), count * finer);
  for (double& value : limited) value *= static_cast<double>(finer);
  double square = 0.0;
  std::vector<double> peaks(static_cast<std::size_t>(window.cycles), 0.0);
  for (std::size_t k = 0; k < limited.size(); ++k) {
    square += limited[k] * limited[k];
    const std::size_t cycle = k * peaks.size() / limited.size();
    peaks[cycle] = std::max(peaks[cycle], std::abs(limited[k]));
  }
  const double rms = std::sqrt(square / static_cast<double>(limited.size()));
  if (!(rms > 0.0)) return Refusal{"crest factor", "nothing is left in its band"};
  return Bounded{median(peaks) / rms, false};
}

}  // namespace loadstair::waveform
