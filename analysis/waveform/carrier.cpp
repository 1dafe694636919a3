#include "analysis/waveform/carrier.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <complex>
#include <numbers>

#include "analysis/base/number.h"
#include "analysis/waveform/prepare.h"

namespace loadstair::waveform {
namespace {

using base::Outcome;
using base::Refusal;
using Complex = std::complex<double>;

constexpr double kTwoPi = 2.0 * std::numbers::pi;
constexpr int kLeastWindowedCycles = 9;
constexpr double kOnGrid = 0.01;  // of a line

Refusal refuse(std::string reason) {
  return {"lines", std::move(reason)};
}

/// Reads single lines of one channel, through no window on the span's grid and through Blackman-Harris off
/// it.
class LineReader {
 public:
  LineReader(const Prepared& channel, const WaveformResult& result, double mean)
      : interval_s_{result.interval_s}, cycles_{result.window.cycles} {
    const auto first = static_cast<std::size_t>(std::max(0.0, std::ceil(result.window.first_sample - 1e-9)));
    const auto count = std::min(static_cast<std::size_t>(std::floor(result.window.length_samples + 1e-6)),
                                channel.size() - first);
    first_ = static_cast<double>(first);
    coherent_ = result.window.coherent;
    samples_.resize(count);
    for (std::size_t k = 0; k < count; ++k) samples_[k] = channel[first + k] - mean;
  }

  /// Line of the span nearest to a frequency, and how far off it lies, in lines.
  [[nodiscard]] double off_grid(double frequency_hz) const {
    const double line = frequency_hz * interval_s_ * static_cast<double>(samples_.size());
    return std::abs(line - std::round(line));
  }
  [[nodiscard]] bool plain(double frequency_hz) const {
    return coherent_ && off_grid(frequency_hz) < kOnGrid;
  }
  [[nodiscard]] bool windowed_possible() const { return cycles_ >= kLeastWindowedCycles; }
  [[nodiscard]] double length_s() const { return interval_s_ * static_cast<double>(samples_.size()); }

  /// Complex amplitude, phase at the record's first sample.
  [[nodiscard]] Complex amplitude(double frequency_hz, bool plain) {
    if (!plain && windowed_.empty()) apply_window();
    const std::vector<double>& samples = plain ? samples_ : windowed_;
    const double omega = kTwoPi * frequency_hz * interval_s_;
    constexpr std::size_t kResync = 256;
    const Complex step = std::polar(1.0, -omega);
    Complex sum = 0.0;
    for (std::size_t start = 0; start < samples.size(); start += kResync) {
      Complex turn = std::polar(1.0, -std::fmod(omega * (first_ + static_cast<double>(start)), kTwoPi));
      const std::size_t past = std::min(samples.size(), start + kResync);
      for (std::size_t k = start; k < past; ++k) {
        sum += samples[k] * turn;
        turn = {turn.real() * step.real() - turn.imag() * step.imag(),
                turn.real() * step.imag() + turn.imag() * step.real()};
      }
    }
    return sum * (2.0 / (plain ? static_cast<double>(samples.size()) : weight_));
  }

  /// How much more noise a line takes through the window: root of its equivalent noise bandwidth.
  static constexpr double kWindowNoise = 1.4162;  // sqrt(2.0044), Harris 1978

 private:
  void apply_window() {
    constexpr std::array<double, 4> kTerms = {0.35875, -0.48829, 0.14128, -0.01168};
    windowed_.resize(samples_.size());
    const double length = static_cast<double>(samples_.size());
    for (std::size_t k = 0; k < samples_.size(); ++k) {
      double weight = 0.0;
      for (std::size_t j = 0; j < kTerms.size(); ++j) {
        weight +=
            kTerms[j] * std::cos(kTwoPi * static_cast<double>(j) * (static_cast<double>(k) + 0.5) / length);
      }
      weight_ += weight;
      windowed_[k] = weight * samples_[k];
    }
  }

  double interval_s_ = 0.0, first_ = 0.0, weight_ = 0.0;
  int cycles_ = 0;
  bool coherent_ = false;
  std::vector<double> samples_, windowed_;
};

/// What both functions start from.
struct Ready {
  WaveformResult result;
  Prepared prepared;
};

Outcome<Ready> ready(const Waveform& waveform, std::size_t channel, const AnalysisSettings& settings) {
  if (channel >= waveform.channels.size()) return refuse("there is no such channel");
  AnalysisSettings alternating = settings;
  alternating.expected = Expected::alternating;
  Outcome<WaveformResult> result = analyse(waveform, alternating);
  if (!result) return result.refusal();
  Outcome<Prepared> prepared = prepare(waveform.channels[channel]);
  if (!prepared) return prepared.refusal();
  return Ready{std::move(result).value(), std::move(prepared).value()};
}

SpectralLine line_of(LineReader& reader, double frequency_hz, double floor_rms, double delay_s) {
  const bool plain = reader.plain(frequency_hz);
  const Complex amplitude = reader.amplitude(frequency_hz, plain) *
                            std::polar(1.0, kTwoPi * std::fmod(frequency_hz * delay_s, 1.0));
  const double rms = std::abs(amplitude) / std::numbers::sqrt2;
  const double angle = std::arg(amplitude) * 180.0 / std::numbers::pi;
  const double floor = floor_rms * (plain ? 1.0 : LineReader::kWindowNoise);
  return {frequency_hz, rms, angle <= -180.0 ? 180.0 : angle, rms < floor};
}

/// Noise of a line anywhere in the band: three times the white equivalent of the whole band's noise.
double floor_of(const ChannelResult& channel, double samples) {
  constexpr double kLineOverNoise = 3.0;
  return kLineOverNoise * channel.noise_rms * std::sqrt(2.0 / samples);
}

std::optional<Refusal> unreadable(const LineReader& reader, double frequency_hz, double interval_s) {
  if (!(frequency_hz > 0.0) || !(frequency_hz < 0.5 / interval_s)) {
    return refuse(base::print_significant(frequency_hz, 6) +
                  " Hz is not between 0 and half the sampling rate");
  }
  if (!reader.plain(frequency_hz) && !reader.windowed_possible()) {
    return refuse(base::print_significant(frequency_hz, 6) +
                  " Hz is no line of this record's whole cycles; record 9 cycles or more");
  }
  return std::nullopt;
}

Refusal refuse_carrier(std::string reason) {
  return {"carrier", std::move(reason)};
}

std::optional<Refusal> unfit(const CarrierSettings& carrier, double fundamental_hz, double interval_s) {
  constexpr double kLeastRatio = 9.0;
  if (!(carrier.carrier_hz >= kLeastRatio * fundamental_hz)) {
    return refuse_carrier("a carrier below 9 times the fundamental has no groups of its own");
  }
  if (!(carrier.carrier_hz < 0.5 / interval_s)) {
    return refuse_carrier("the carrier lies above half the sampling rate; sample faster");
  }
  if (carrier.multiples < 1 || carrier.sidebands < 0 || !(carrier.search_lines >= 0.0)) {
    return refuse_carrier("multiples from 1 on, sidebands and search from 0 on");
  }
  if (2.0 * (carrier.sidebands + 0.5) * fundamental_hz > carrier.carrier_hz) {
    return refuse_carrier("so many sidebands reach half way to the next multiple of the carrier");
  }
  return std::nullopt;
}

double sinc(double x) {
  return std::abs(x) < 1e-8 ? 1.0 : std::sin(x) / x;
}

/// Multiples whose whole group lies below half the sampling rate.
int resolved_multiples(const CarrierSettings& carrier, double carrier_hz, double fundamental_hz,
                       double interval_s) {
  const double most = (0.5 / interval_s - (carrier.sidebands + 0.5) * fundamental_hz) / carrier_hz;
  return std::min(carrier.multiples, static_cast<int>(std::max(0.0, std::floor(most))));
}

/// The carrier frequency at which the groups hold most power: sidebands in pairs need no line at the carrier
/// itself.
double refined_carrier(LineReader& reader, const CarrierSettings& carrier, double fundamental_hz,
                       double interval_s) {
  const int multiples =
      std::min(2, resolved_multiples(carrier, carrier.carrier_hz, fundamental_hz, interval_s));
  const int sidebands = std::min(3, carrier.sidebands);
  const auto power = [&](double carrier_hz) {
    double sum = 0.0;
    for (int m = 1; m <= multiples; ++m) {
      for (int n = -sidebands; n <= sidebands; ++n) {
        sum += std::norm(reader.amplitude(m * carrier_hz + n * fundamental_hz, false));
      }
    }
    return sum;
  };
  const double line_hz = 1.0 / reader.length_s();
  constexpr double kSteps = 8.0;  // on a line; the second multiple moves twice as fast
  double step = line_hz / kSteps;
  double best = carrier.carrier_hz;
  double most = power(best);
  const int reach = static_cast<int>(std::ceil(carrier.search_lines * kSteps));
  for (int k = -reach; k <= reach; ++k) {
    const double at = carrier.carrier_hz + k * step;
    const double there = power(at);
    if (there > most) most = there, best = at;
  }
  // Parabola through three points, narrower each time.
  for (int round = 0; round < 4; ++round, step *= 0.1) {
    const double below = power(best - step);
    const double above = power(best + step);
    most = power(best);
    const double curvature = below - 2.0 * most + above;
    if (!(curvature < 0.0)) break;
    best += std::clamp(0.5 * (below - above) / curvature, -1.0, 1.0) * step;
  }
  return best;
}

}  // namespace

Outcome<std::vector<SpectralLine>> lines_at(const Waveform& waveform, std::size_t channel,
                                            std::span<const double> frequencies_hz,
                                            const AnalysisSettings& settings) {
  const Outcome<Ready> record = ready(waveform, channel, settings);
  if (!record) return record.refusal();
  const ChannelResult& result = record->result.channels[channel];
  LineReader reader{record->prepared, record->result, result.mean};
  const double floor = floor_of(result, record->result.window.length_samples);
  std::vector<SpectralLine> out;
  for (const double frequency_hz : frequencies_hz) {
    if (const auto reason = unreadable(reader, frequency_hz, waveform.interval_s)) return *reason;
    out.push_back(line_of(reader, frequency_hz, floor, waveform.channels[channel].delay_s));
  }
  return out;
}

Outcome<CarrierGroups> carrier_groups(const Waveform& waveform, std::size_t channel,
                                      const CarrierSettings& carrier, const AnalysisSettings& settings) {
  const Outcome<Ready> record = ready(waveform, channel, settings);
  if (!record) return record.refusal();
  const double f1 = record->result.fundamental->frequency_hz;
  const double interval_s = waveform.interval_s;
  if (const auto reason = unfit(carrier, f1, interval_s)) return *reason;
  const ChannelResult& result = record->result.channels[channel];
  LineReader reader{record->prepared, record->result, result.mean};
  CarrierGroups out;
  out.carrier_hz = carrier.carrier_hz;
  const double whole_hz = std::round(carrier.carrier_hz / f1) * f1;
  // A whole ratio is taken where the record cannot tell it from the given carrier.
  out.synchronous = std::abs(whole_hz - carrier.carrier_hz) * reader.length_s() < kOnGrid;
  if (out.synchronous) {
    out.carrier_hz = whole_hz;
  } else if (!reader.windowed_possible()) {
    return refuse_carrier("not a whole multiple of the fundamental; record 9 cycles or more");
  } else if (carrier.search_lines > 0.0) {
    out.carrier_hz = refined_carrier(reader, carrier, f1, interval_s);
  }
  out.ratio = out.carrier_hz / f1;
  const double floor = floor_of(result, record->result.window.length_samples);
  const int multiples = resolved_multiples(carrier, out.carrier_hz, f1, interval_s);
  if (multiples == 0) return refuse_carrier("no group lies below half the sampling rate; sample faster");
  for (int m = 1; m <= multiples; ++m) {
    CarrierGroup group{m, m * out.carrier_hz, 0.0, {}};
    for (int n = -carrier.sidebands; n <= carrier.sidebands; ++n) {
      SpectralLine line =
          line_of(reader, m * out.carrier_hz + n * f1, floor, waveform.channels[channel].delay_s);
      if (carrier.samples_are_means) line.rms /= sinc(std::numbers::pi * line.frequency_hz * interval_s);
      if (!line.below_floor) group.rms = std::hypot(group.rms, line.rms);
      group.lines.push_back({n, line});
    }
    out.groups.push_back(std::move(group));
  }
  return out;
}

}  // namespace loadstair::waveform
