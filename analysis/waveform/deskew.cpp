#include "analysis/waveform/deskew.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "analysis/base/number.h"
#include "analysis/estimate/coverage.h"
#include "analysis/waveform/lines.h"
#include "analysis/waveform/prepare.h"
#include "analysis/waveform/span_sum.h"

namespace loadstair::waveform {
namespace {

using base::Outcome;
using base::Refusal;

constexpr double kTwoPi = 2.0 * std::numbers::pi;
constexpr int kLeastCycles = 5;

Refusal refuse(std::string reason) {
  return {"deskew", std::move(reason)};
}

/// Orders that stand out in both channels, with the weight of their delay (inverse variance but for a
/// factor).
struct UsedOrder {
  int order = 0;
  double weight = 0.0;
};

std::vector<UsedOrder> used_orders(const ChannelResult& v, const ChannelResult& i) {
  constexpr double kLeastShare = 0.01;
  constexpr double kOverFloor = 10.0 / 3.0;  // the floor is three times a line's noise
  std::vector<UsedOrder> out;
  for (std::size_t h = 0; h < std::min(v.harmonics.size(), i.harmonics.size()); ++h) {
    const Harmonic& a = v.harmonics[h];
    const Harmonic& b = i.harmonics[h];
    const bool stands_out = a.share >= kLeastShare && b.share >= kLeastShare &&
                            a.rms > kOverFloor * v.line_floor_rms && b.rms > kOverFloor * i.line_floor_rms;
    if (h > 0 && !stands_out) continue;
    // Variance of a phase: (noise of the line/line)^2, both channels; of the delay: over the order squared. A
    // thousandth keeps a noiseless channel from dividing by zero.
    constexpr double kLeastNoise = 1e-9;
    const double noise = std::hypot(v.line_floor_rms / a.rms, i.line_floor_rms / b.rms) + kLeastNoise;
    const double order = static_cast<double>(h + 1);
    out.push_back({static_cast<int>(h) + 1, order * order / (noise * noise)});
  }
  return out;
}

/// Delay of the current per cycle (rows) and used order (columns), s.
std::vector<std::vector<double>> delays(const Prepared& v, const Prepared& i, const WaveformResult& result,
                                        const std::vector<UsedOrder>& orders, double known_s) {
  const double period = result.window.length_samples / result.window.cycles;
  const double frequency_hz = result.fundamental->frequency_hz;
  std::vector<std::vector<double>> out;
  for (int c = 0; c < result.window.cycles; ++c) {
    const double begin = result.window.first_sample + period * c;
    const SpanSum span =
        SpanSum::between(begin, std::min(begin + period, static_cast<double>(v.size())), v.size());
    std::vector<double> row;
    double predicted = 0.0;
    for (const UsedOrder& used : orders) {
      const double order = used.order;
      const auto a = fundamental_sum(v, span, period / order);
      const auto b = fundamental_sum(i, span, period / order);
      const double omega = kTwoPi * frequency_hz * order;
      // Whole turns are those of the fundamental's delay.
      const double turn = std::remainder(std::arg(a * std::conj(b)) - omega * predicted, kTwoPi);
      const double delay = predicted + turn / omega;
      if (row.empty()) predicted = delay;
      row.push_back(delay - known_s);
    }
    out.push_back(std::move(row));
  }
  return out;
}

struct MeanOf {
  double mean = 0.0, standard_uncertainty = 0.0;
};

MeanOf mean_of(const std::vector<double>& values) {
  const double n = static_cast<double>(values.size());
  double mean = 0.0;
  for (const double value : values) mean += value / n;
  double square = 0.0;
  for (const double value : values) square += (value - mean) * (value - mean);
  return {mean, std::sqrt(square / (n * (n - 1.0)))};
}

std::optional<Refusal> unfit(const WaveformResult& result) {
  if (!result.fundamental) return result.fundamental.refusal();
  if (result.window.cycles < kLeastCycles) {
    return refuse(base::print_integer(result.window.cycles) + " whole cycles are too few; record " +
                  base::print_integer(kLeastCycles) + " or more");
  }
  const ChannelResult& v = result.channels[*result.voltage];
  const ChannelResult& i = result.channels[*result.current];
  if (v.peak.lower_bound || i.peak.lower_bound) return refuse("samples are clipped: set a larger range");
  if (!result.power) return result.power.refusal();
  if (!result.power->fundamental) return result.power->fundamental.refusal();
  const double phase_deg = result.power->fundamental->phase_deg;
  constexpr double kMostPhase_deg = 30.0;
  if (std::abs(phase_deg) > 180.0 - kMostPhase_deg) {
    return refuse("the current has the opposite sign: turn the probe or give it a negative scale");
  }
  if (std::abs(phase_deg) > kMostPhase_deg) {
    return refuse("the current is " + base::print_significant(phase_deg, 3) +
                  " degrees behind the voltage: not one resistive signal");
  }
  return std::nullopt;
}

/// Fills in what single orders say, and how far they disagree with one delay.
void set_orders(Deskew& out, const std::vector<std::vector<double>>& by_cycle,
                const std::vector<UsedOrder>& orders) {
  double worst = 0.0;
  int worst_order = 0;
  for (std::size_t h = 0; h < orders.size(); ++h) {
    std::vector<double> delay, difference;
    for (const auto& row : by_cycle) delay.push_back(row[h]);
    const MeanOf one = mean_of(delay);
    out.orders.push_back({orders[h].order, one.mean, one.standard_uncertainty});
    const double off = std::abs(one.mean - out.delay_s);
    constexpr double kDeviations = 3.0;
    if (off > kDeviations * std::hypot(one.standard_uncertainty, out.type_a_s) && off > worst) {
      worst = off;
      worst_order = orders[h].order;
    }
  }
  out.model_s = worst / std::numbers::sqrt3;
  if (worst_order == 0) return;
  out.remarks.push_back("order " + base::print_integer(worst_order) + " disagrees with one delay by " +
                        base::print_significant(1e9 * worst, 2) +
                        " ns: a load with inductance, or probes of unlike bandwidth");
}

}  // namespace

Outcome<Deskew> measure_deskew(const Waveform& waveform, const AnalysisSettings& settings) {
  if (!waveform.voltage || !waveform.current) return refuse("no voltage and current are named");
  AnalysisSettings alternating = settings;
  alternating.expected = Expected::alternating;
  const Outcome<WaveformResult> result = analyse(waveform, alternating);
  if (!result) return result.refusal();
  if (const auto reason = unfit(*result)) return *reason;
  const Channel& voltage = waveform.channels[*waveform.voltage];
  const Channel& current = waveform.channels[*waveform.current];
  const Outcome<Prepared> v = prepare(voltage);
  const Outcome<Prepared> i = prepare(current);
  if (!v) return v.refusal();
  if (!i) return i.refusal();
  const auto orders = used_orders(result->channels[*waveform.voltage], result->channels[*waveform.current]);
  const auto by_cycle = delays(*v, *i, *result, orders, current.delay_s - voltage.delay_s);
  std::vector<double> delay;
  for (const auto& row : by_cycle) {
    double sum = 0.0;
    double weight = 0.0;
    for (std::size_t h = 0; h < orders.size(); ++h) {
      sum += orders[h].weight * row[h];
      weight += orders[h].weight;
    }
    delay.push_back(sum / weight);
  }
  Deskew out;
  const MeanOf all = mean_of(delay);
  out.delay_s = all.mean;
  out.type_a_s = all.standard_uncertainty;
  out.cycles = result->window.cycles;
  set_orders(out, by_cycle, orders);
  out.standard_uncertainty_s = std::hypot(out.type_a_s, out.model_s);
  // Welch-Satterthwaite: the part of the model has no end of degrees of freedom.
  const double own = out.cycles - 1.0;
  const double ratio = out.type_a_s > 0.0 ? out.standard_uncertainty_s / out.type_a_s : 1.0;
  out.degrees_of_freedom = own * std::pow(ratio, 4.0);
  out.half_width_s =
      estimate::student_t(estimate::kLevel, out.degrees_of_freedom) * out.standard_uncertainty_s;
  return out;
}

}  // namespace loadstair::waveform
