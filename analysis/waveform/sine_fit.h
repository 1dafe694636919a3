// Least-squares sine fit of IEEE Std 1057: three parameters (frequency known) and four.
#pragma once

#include <span>

#include "analysis/base/outcome.h"

namespace loadstair::waveform {

/// y_k = cosine cos(2 pi f k) + sine sin(2 pi f k) + offset, k from 0.
struct SineFit {
  double cosine = 0.0;
  double sine = 0.0;
  double offset = 0.0;
  double frequency = 0.0;     ///< cycles per sample
  double rms_residual = 0.0;  ///< over all samples
  int iterations = 0;

  [[nodiscard]] double amplitude() const;  ///< sqrt(cosine^2 + sine^2)
  [[nodiscard]] double phase_rad() const;  ///< of the cosine form, atan2(-sine, cosine)
};

/// The three-parameter fit at a known frequency (cycles per sample, 0 < f < 0.5).
/// Refuses fewer than 4 samples, a sample that is not finite, and a frequency that makes the problem
/// singular.
base::Outcome<SineFit> fit_sine(std::span<const double> samples, double frequency);

/// The four-parameter fit from a start frequency within a fraction of a cycle over the record.
/// Refuses as above, and when the frequency leaves (0, 0.5) or does not converge in 50 iterations.
base::Outcome<SineFit> fit_sine_and_frequency(std::span<const double> samples, double start_frequency);

/// The frequency (cycles per sample) of the largest line, by a Hann-windowed DFT and interpolation between
/// lines. low, high   where to look, cycles per sample. Refuses when no line stands out of the rest (Fisher
/// 1929, test of the largest ordinate, 1e-6).
base::Outcome<double> largest_line(std::span<const double> samples, double low, double high);

}  // namespace loadstair::waveform
