#include "analysis/waveform/sine_fit.h"

#include <cmath>
#include <complex>
#include <cstddef>
#include <numbers>
#include <string>
#include <vector>

#include "analysis/base/number.h"
#include "analysis/waveform/largest_line.h"
#include "analysis/waveform/normal_equations.h"
#include "analysis/waveform/transform.h"

namespace loadstair::waveform {
namespace {

using base::Refusal;

constexpr double kTwoPi = 2.0 * std::numbers::pi;

Refusal refuse(std::string reason) {
  return {"sine fit", std::move(reason)};
}

/// Nothing to fit, or the number of the first sample that is not finite.
std::optional<Refusal> unfit(std::span<const double> samples, double frequency) {
  if (samples.size() < 4) return refuse("four samples at least are needed");
  if (!(frequency > 0.0 && frequency < 0.5)) {
    return refuse("the frequency must lie between 0 and half the sampling rate");
  }
  for (std::size_t k = 0; k < samples.size(); ++k) {
    if (!std::isfinite(samples[k])) {
      return refuse("sample " + base::print_integer(static_cast<std::int64_t>(k) + 1) +
                    " is missing or not finite");
    }
  }
  return std::nullopt;
}

void set_residual(SineFit& fit, std::span<const double> samples) {
  double sum = 0.0;
  const double omega = kTwoPi * fit.frequency;
  for (std::size_t k = 0; k < samples.size(); ++k) {
    const double angle = omega * static_cast<double>(k);
    const double rest = samples[k] - fit.cosine * std::cos(angle) - fit.sine * std::sin(angle) - fit.offset;
    sum += rest * rest;
  }
  fit.rms_residual = std::sqrt(sum / static_cast<double>(samples.size()));
}

}  // namespace

double SineFit::amplitude() const {
  return std::hypot(cosine, sine);
}
double SineFit::phase_rad() const {
  return std::atan2(-sine, cosine);
}

base::Outcome<SineFit> fit_sine(std::span<const double> samples, double frequency) {
  if (const auto reason = unfit(samples, frequency)) return *reason;
  NormalEquations<3> equations;
  for (std::size_t k = 0; k < samples.size(); ++k) {
    const double angle = kTwoPi * frequency * static_cast<double>(k);
    equations.add({std::cos(angle), std::sin(angle), 1.0}, samples[k]);
  }
  const auto solution = equations.solve();
  if (!solution) return refuse("the record is too short for this frequency");
  SineFit fit{(*solution)[0], (*solution)[1], (*solution)[2], frequency, 0.0, 1};
  set_residual(fit, samples);
  return fit;
}

base::Outcome<SineFit> fit_sine_and_frequency(std::span<const double> samples, double start_frequency) {
  base::Outcome<SineFit> started = fit_sine(samples, start_frequency);
  if (!started) return started;
  SineFit fit = started.value();
  // The fourth column is scaled by the record's length, so that all columns are of like size.
  const double length = static_cast<double>(samples.size());
  for (int iteration = 1; iteration <= 50; ++iteration) {
    NormalEquations<4> equations;
    const double omega = kTwoPi * fit.frequency;
    for (std::size_t k = 0; k < samples.size(); ++k) {
      const double t = static_cast<double>(k);
      const double c = std::cos(omega * t);
      const double s = std::sin(omega * t);
      equations.add({c, s, 1.0, (fit.sine * c - fit.cosine * s) * t / length}, samples[k]);
    }
    const auto solution = equations.solve();
    if (!solution)
      return refuse("the record does not fix the frequency; record more cycles or a larger signal");
    const double step = (*solution)[3] / length / kTwoPi;
    fit.cosine = (*solution)[0];
    fit.sine = (*solution)[1];
    fit.offset = (*solution)[2];
    fit.frequency += step;
    fit.iterations = iteration;
    if (!(fit.frequency > 0.0 && fit.frequency < 0.5)) return refuse("the frequency left the sampled band");
    if (std::abs(step) < 1e-15 + 1e-14 * fit.frequency) {
      base::Outcome<SineFit> last = fit_sine(samples, fit.frequency);
      if (last) last->iterations = iteration;
      return last;
    }
  }
  // Rounding keeps the last steps from shrinking further where the residual is large: near enough is
  // converged.
  base::Outcome<SineFit> last = fit_sine(samples, fit.frequency);
  if (last && last->rms_residual <= started->rms_residual) return last;
  return refuse("no convergence in 50 iterations; start nearer to the frequency");
}

base::Outcome<Line> find_largest_line(std::span<const double> samples, double low, double high) {
  const std::size_t count = samples.size();
  if (count < 16) return refuse("16 samples at least are needed to look for a line");
  double mean = 0.0;
  for (const double sample : samples) mean += sample;
  mean /= static_cast<double>(count);
  const auto spectrum = real_transform(count, [&](double* into) {
    for (std::size_t k = 0; k < count; ++k) {
      const double hann =
          0.5 - 0.5 * std::cos(kTwoPi * (static_cast<double>(k) + 0.5) / static_cast<double>(count));
      into[k] = (samples[k] - mean) * hann;
    }
  });
  const auto first = static_cast<std::size_t>(std::max(1.0, std::floor(low * static_cast<double>(count))));
  const auto last = static_cast<std::size_t>(
      std::min(static_cast<double>(spectrum.size() - 2), std::ceil(high * static_cast<double>(count))));
  double total = 0.0;
  for (std::size_t k = 0; k < spectrum.size(); ++k) total += std::norm(spectrum[k]);
  if (!(total > 0.0) || first > last) return refuse("no fundamental: the record does not alternate");
  std::size_t peak = first;
  for (std::size_t k = first; k <= last; ++k) {
    if (std::norm(spectrum[k]) > std::norm(spectrum[peak])) peak = k;
  }
  double line = 0.0;
  for (std::size_t k = peak < 2 ? 0 : peak - 2; k <= std::min(peak + 2, spectrum.size() - 1); ++k) {
    line += std::norm(spectrum[k]);
  }
  const double below = std::abs(spectrum[peak - 1]);
  const double above = std::abs(spectrum[peak + 1]);
  const double ratio = std::max(below, above) / std::abs(spectrum[peak]);
  const double shift = (2.0 * ratio - 1.0) / (ratio + 1.0);
  // A drift's peak may be placed at nothing at all; half a cycle is the least that a record can show.
  constexpr double kLeastCycles = 0.5;
  const double position =
      std::max(kLeastCycles, static_cast<double>(peak) + (above >= below ? shift : -shift));
  Line found{position / static_cast<double>(count), line / total};
  // Fisher's test of the largest of n ordinates at 1e-6; a Hann line spreads over about 1.6 times the share.
  const double ordinates = std::max(3.0, static_cast<double>(count) / 3.0);
  const double fisher = 1.0 - std::pow(1e-6 / ordinates, 1.0 / (ordinates - 1.0));
  constexpr double kLeastShare = 0.05;
  if (found.share < std::max(kLeastShare, std::min(0.9, 1.6 * fisher))) {
    return refuse("no fundamental: no line stands out of the noise");
  }
  return found;
}

base::Outcome<double> largest_line(std::span<const double> samples, double low, double high) {
  if (const auto reason = unfit(samples, 0.25)) return *reason;
  const base::Outcome<Line> found = find_largest_line(samples, low, high);
  if (!found) return found.refusal();
  return found->frequency;
}

}  // namespace loadstair::waveform
