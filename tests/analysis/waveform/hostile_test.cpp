// Input that no scope should give: every result is a finite number or a refusal that says why.
#include <catch2/catch.hpp>
#include <cmath>
#include <limits>
#include <numbers>
#include <vector>

#include "analysis/waveform/carrier.h"
#include "analysis/waveform/dc_component.h"
#include "analysis/waveform/deskew.h"
#include "analysis/waveform/quote.h"
#include "analysis/waveform/waveform.h"

namespace loadstair::waveform {
namespace {

constexpr double kNaN = std::numeric_limits<double>::quiet_NaN();
constexpr double kInf = std::numeric_limits<double>::infinity();

void finite(double value) {
  CHECK(std::isfinite(value));
}
void finite(const Bounded& value) {
  finite(value.value);
}
void finite(const estimate::Estimate& value) {
  finite(value.value());
  finite(value.standard_uncertainty());
}
void finite(const GroupedHarmonics& groups);
void finite(const Power& power);
void finite(const Power::FundamentalSet& set);
template <class T>
void finite(const base::Outcome<T>& outcome) {
  if (outcome) {
    finite(*outcome);
  } else {
    CHECK_FALSE(outcome.refusal().reason.empty());
  }
}

void finite(const GroupedHarmonics& groups) {
  for (const double value : {groups.thd_group, groups.thd_subgroup, groups.synchronisation}) finite(value);
  for (const GroupWindow& window : groups.window_list) {
    for (const double value :
         {window.first_sample, window.length_samples, window.frequency_hz, window.standard_uncertainty_hz})
      finite(value);
  }
  for (const GroupedOrder& order : groups.orders) {
    for (const double value : {order.group_rms, order.group_rms_low, order.group_rms_high, order.subgroup_rms,
                               order.subgroup_rms_low, order.subgroup_rms_high, order.interharmonic_rms,
                               order.interharmonic_subgroup_rms})
      finite(value);
  }
  if (!groups.smoothed) {
    CHECK_FALSE(groups.smoothed.refusal().reason.empty());
    return;
  }
  for (const SmoothedOrder& order : *groups.smoothed) {
    for (const double value :
         {order.group_rms, order.group_rms_high, order.subgroup_rms, order.subgroup_rms_high})
      finite(value);
  }
}

void finite(const ChannelResult& channel) {
  for (const double value :
       {channel.mean, channel.mean_standard_uncertainty, channel.rms_standard_uncertainty, channel.rms.value,
        channel.ripple_rms.value, channel.minimum, channel.maximum, channel.peak.value,
        channel.peak_to_peak.value, channel.mean_rectified, channel.mean_sign, channel.crest_band_hz,
        channel.total_distortion_band_hz, channel.thd_floor, channel.line_floor_rms, channel.residual_rms,
        channel.noise_rms, channel.quantisation_step})
    finite(value);
  finite(channel.crest_factor);
  finite(channel.crest_factor_in_band);
  finite(channel.form_factor);
  finite(channel.thd_f);
  finite(channel.thd_r);
  finite(channel.total_distortion);
  finite(channel.groups);
  if (!channel.standard_decision) CHECK_FALSE(channel.standard_decision.refusal().reason.empty());
  for (const Harmonic& harmonic : channel.harmonics) {
    for (const double value : {harmonic.frequency_hz, harmonic.rms, harmonic.share, harmonic.phase_deg})
      finite(value);
  }
}

void finite(const Power::FundamentalSet& set) {
  for (const double value :
       {set.displacement_power_factor, set.phase_deg, set.active_w, set.reactive_var, set.apparent_va,
        set.harmonic_active_w, set.nonfundamental_va, set.current_distortion_var, set.voltage_distortion_var,
        set.harmonic_apparent_va, set.harmonic_distortion_var, set.voltage_thd, set.current_thd})
    finite(value);
  for (const double value : set.active_by_order_w) finite(value);
  for (const double value : set.reactive_by_order_var) finite(value);
}

void finite(const Power& power) {
  for (const double value : {power.active_w, power.apparent_va, power.power_factor, power.nonactive_var,
                             power.ripple_w, power.active_standard_uncertainty_w})
    finite(value);
  finite(power.fundamental);
}

void finite(const WaveformQuote& quoted) {
  finite(quoted.frequency_hz);
  for (const ChannelQuote& channel : quoted.channels) {
    for (const auto* figure :
         {&channel.mean, &channel.rms, &channel.ripple_rms, &channel.peak, &channel.crest_factor,
          &channel.crest_factor_in_band, &channel.form_factor, &channel.thd_f})
      finite(*figure);
  }
  const PowerQuote& power = quoted.power;
  for (const auto* figure : {&power.active_w, &power.ripple_w, &power.apparent_va, &power.power_factor,
                             &power.displacement_power_factor, &power.nonactive_var})
    finite(*figure);
}

void analyse_all(const std::vector<double>& v, const std::vector<double>& i, double interval_s,
                 double scale) {
  Waveform waveform;
  waveform.interval_s = interval_s;
  waveform.channels = {{.name = "v", .unit = "V", .values = v, .scale = scale},
                       {.name = "i", .unit = "A", .values = i, .delay_s = 1e-6}};
  waveform.voltage = 0;
  waveform.current = 1;
  ChannelAccuracy accuracy{{"probe", "", ""}, 0.02, 0.1, 1e-6, {}};
  accuracy.bandwidth_hz = 1e5;
  accuracy.linearity = 0.005;
  accuracy.phase_rad = 0.01;
  for (const Expected expected : {Expected::either, Expected::alternating, Expected::direct}) {
    AnalysisSettings settings;
    settings.expected = expected;
    settings.crest_band_hz = 2000.0;
    settings.least_cycles = 1;
    const auto result = analyse(waveform, settings);
    if (!result) {
      CHECK_FALSE(result.refusal().reason.empty());
      continue;
    }
    for (const ChannelResult& channel : result->channels) {
      finite(channel);
      const ZeroReading zero{0.0, 0.01, 19.0, 0.01, 0.0};
      const auto direct = dc_component(channel, {zero, zero}, accuracy, {"r", "s"}, 2.0);
      if (direct) finite(direct->value);
    }
    finite(result->power);
    finite(quote(*result, {.channels = {accuracy, accuracy},
                           .deskewed = false,
                           .timebase = 1e-4,
                           .timebase_owner = {},
                           .occasion = {"r", "s"}}));
  }
  const auto zero = zero_of(waveform.channels[0]);
  if (zero) finite(zero->value);
  const auto deskew = measure_deskew(waveform);
  if (deskew) {
    finite(deskew->delay_s);
    finite(deskew->half_width_s);
  }
  const auto lines = lines_at(waveform, 0, std::vector<double>{50.0, 777.7});
  if (lines) {
    for (const SpectralLine& line : *lines) finite(line.rms);
  }
  const auto groups = carrier_groups(waveform, 0, {.carrier_hz = 1000.0});
  if (groups) finite(groups->carrier_hz);
}

TEST_CASE("hostile records give finite numbers or a reason") {
  constexpr std::size_t kSamples = 2400;
  std::vector<double> sine, zeros(kSamples, 0.0), constant(kSamples, 4.2);
  for (std::size_t k = 0; k < kSamples; ++k)
    sine.push_back(std::sin(2.0 * std::numbers::pi * 12.3 * static_cast<double>(k) / kSamples));
  const auto times = [&](double factor) {
    std::vector<double> out = sine;
    for (double& sample : out) sample *= factor;
    return out;
  };
  const auto with = [&](auto change) {
    std::vector<double> out = sine;
    for (std::size_t k = 0; k < out.size(); ++k) change(out[k], k);
    return out;
  };
  std::vector<std::vector<double>> hostile = {
      {},
      {1.0},
      std::vector<double>(15, 1.0),
      std::vector<double>(16, 1.0),
      zeros,
      constant,
      std::vector<double>(kSamples, kNaN),
      std::vector<double>(kSamples, kInf),
      std::vector<double>(kSamples, 1e300),
      std::vector<double>(kSamples, 5e-324),
      times(1e300),
      times(1e160),
      times(1e59),
      times(1e-59),
      times(1e-160),
      times(5e-324),
      with([](double& x, std::size_t k) { x = k % 2 == 0 ? x : kNaN; }),
      with([](double& x, std::size_t k) { x = k % 2 == 0 ? kInf : -kInf; }),
      with([](double& x, std::size_t k) { x = k % 150 == 7 ? kNaN : x; }),
      with([](double& x, std::size_t k) { x = k == 0 || k == 2399 ? kNaN : x; }),
      with([](double& x, std::size_t k) { x = k == 1000 ? 1e300 : x; }),
      with([](double& x, std::size_t k) { x = k == 1000 ? 1e30 : x; }),
      with([](double& x, std::size_t k) { x = k == 1000 ? 1.0 : 0.0; }),
      with([](double& x, std::size_t k) { x = k % 2 == 0 ? 1.0 : -1.0; }),
      with([](double& x, std::size_t k) { x = static_cast<double>(k); }),
      with([](double& x, std::size_t) { x = x > 0.0 ? 1.0 : -1.0; }),
      with([](double& x, std::size_t) { x = x * 1e-9 + 1e9; }),
      with([](double& x, std::size_t) { x = std::round(2.0 * x); }),
  };
  for (std::size_t h = 0; h < hostile.size(); ++h) {
    INFO("record " << h);
    const auto& v = hostile[h];
    std::vector<double> companion(v.size(), 0.0);
    for (std::size_t k = 0; k < v.size(); ++k) companion[k] = sine[k % sine.size()];
    for (const double interval_s : {1e-4, 1e-300, 1e300, 0.0, -1.0, kNaN})
      analyse_all(v, companion, interval_s, 1.0);
    analyse_all(companion, v, 1e-4, 1.0);
    analyse_all(v, v, 1e-4, 1.0);
    for (const double scale : {0.0, -1e3, 1e300, 1e-300, kNaN, kInf}) analyse_all(v, companion, 1e-4, scale);
  }
}

}  // namespace
}  // namespace loadstair::waveform
