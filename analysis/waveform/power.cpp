#include "analysis/waveform/power.h"

#include <algorithm>
#include <cmath>
#include <complex>
#include <numbers>
#include <vector>

#include "analysis/waveform/scatter.h"

namespace loadstair::waveform {
namespace {

using base::Refusal;

constexpr double kTwoPi = 2.0 * std::numbers::pi;

double root_of(double square) {
  return std::sqrt(std::max(0.0, square));
}

Power::FundamentalSet fundamental_set(const ChannelAnalysis& voltage, const ChannelAnalysis& current,
                                      const Power& power) {
  Power::FundamentalSet out;
  const std::size_t orders = std::min(voltage.lines.size(), current.lines.size());
  for (std::size_t h = 0; h < orders; ++h) {
    // V conj(I)/2 of amplitudes: P + jQ, Q > 0 when the current lags.
    const std::complex<double> complex_power = 0.5 * voltage.lines[h] * std::conj(current.lines[h]);
    out.active_by_order_w.push_back(complex_power.real());
    out.reactive_by_order_var.push_back(complex_power.imag());
  }
  const double v = voltage.result.rms.value;
  const double i = current.result.rms.value;
  const double v1 = std::abs(voltage.lines[0]) / std::numbers::sqrt2;
  const double i1 = std::abs(current.lines[0]) / std::numbers::sqrt2;
  const double vh = root_of(v * v - v1 * v1);
  const double ih = root_of(i * i - i1 * i1);
  out.active_w = out.active_by_order_w[0];
  out.reactive_var = out.reactive_by_order_var[0];
  out.apparent_va = v1 * i1;
  out.displacement_power_factor = out.active_w / out.apparent_va;
  out.phase_deg = std::atan2(out.reactive_var, out.active_w) * 180.0 / std::numbers::pi;
  out.harmonic_active_w = power.active_w - out.active_w;
  out.nonfundamental_va = root_of(power.apparent_va * power.apparent_va - out.apparent_va * out.apparent_va);
  out.current_distortion_var = v1 * ih;
  out.voltage_distortion_var = vh * i1;
  out.harmonic_apparent_va = vh * ih;
  out.harmonic_distortion_var = root_of(vh * ih * vh * ih - out.harmonic_active_w * out.harmonic_active_w);
  out.voltage_thd = vh / v1;
  out.current_thd = ih / i1;
  return out;
}

/// What a difference of delays took from the mean of the product: lines as they would have been without
/// correction against lines as corrected.
double delay_correction(const ChannelAnalysis& voltage, const ChannelAnalysis& current,
                        double delay_difference_s, double frequency_hz) {
  double correction = 0.0;
  for (std::size_t h = 0; h < std::min(voltage.lines.size(), current.lines.size()); ++h) {
    const std::complex<double> corrected = 0.5 * voltage.lines[h] * std::conj(current.lines[h]);
    const double angle = kTwoPi * frequency_hz * static_cast<double>(h + 1) * delay_difference_s;
    correction += corrected.real() - (corrected * std::polar(1.0, -angle)).real();
  }
  return correction;
}

}  // namespace

base::Outcome<Power> powers(const Prepared& v, const Prepared& i, const ChannelAnalysis& voltage,
                            const ChannelAnalysis& current, const CycleWindow& window,
                            double delay_difference_s, double frequency_hz) {
  Power out;
  out.apparent_va = voltage.result.rms.value * current.result.rms.value;
  if (!(out.apparent_va > 0.0)) return Refusal{"power", "voltage or current is zero"};
  const double v_mean = voltage.result.mean;
  const double i_mean = current.result.mean;
  out.ripple_w = window.span.mean([&](std::size_t k) { return (v[k] - v_mean) * (i[k] - i_mean); });
  if (delay_difference_s != 0.0 && window.cycles > 0) {
    out.ripple_w += delay_correction(voltage, current, delay_difference_s, frequency_hz);
  }
  out.active_w = v_mean * i_mean + out.ripple_w;
  std::vector<double> by_part;
  for (const SpanSum& part : parts_of(window, v.size())) {
    by_part.push_back(part.mean([&](std::size_t k) { return v[k] * i[k]; }));
  }
  const Scatter scatter = scatter_of(by_part);
  out.active_standard_uncertainty_w = scatter.standard_uncertainty;
  out.degrees_of_freedom = scatter.degrees_of_freedom;
  out.power_factor = out.active_w / out.apparent_va;
  out.nonactive_var = root_of(out.apparent_va * out.apparent_va - out.active_w * out.active_w);
  if (window.cycles == 0) {
    out.fundamental = Refusal{"power", "no fundamental"};
  } else if (!voltage.result.thd_f) {
    out.fundamental = voltage.result.thd_f.refusal();
  } else if (!current.result.thd_f) {
    out.fundamental = current.result.thd_f.refusal();
  } else {
    out.fundamental = fundamental_set(voltage, current, out);
  }
  return out;
}

}  // namespace loadstair::waveform
