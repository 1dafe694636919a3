// Any record gives finite numbers or a refusal with a reason; nothing in between, and never an exception.
#include <catch2/catch.hpp>
#include <cmath>
#include <cstdlib>
#include <limits>
#include <numbers>
#include <random>
#include <vector>

#include "analysis/base/number.h"
#include "analysis/waveform/quote.h"
#include "analysis/waveform/waveform.h"

namespace loadstair::waveform {
namespace {

constexpr double kTwoPi = 2.0 * std::numbers::pi;

class Draws {
 public:
  explicit Draws(std::uint64_t seed) : random_{seed} {}
  double unit() { return static_cast<double>(random_() >> 11) * 0x1p-53; }
  double decades(double low, double high) { return std::pow(10.0, low + (high - low) * unit()); }
  bool one_in(int n) { return unit() * n < 1.0; }
  int below(int n) { return static_cast<int>(unit() * n); }

 private:
  std::mt19937_64 random_;
};

struct Record {
  std::vector<double> v, i;
  double interval_s;
};

double shape(int kind, double phase, Draws& draws) {
  switch (kind) {
    case 0:
      return std::sin(phase);
    case 1:
      return std::sin(phase) > 0.0 ? 1.0 : -1.0;
    case 2:
      return std::fmod(phase, kTwoPi) < 1.0 ? 1.0 : 0.0;
    case 3:
      return std::sin(phase) + 0.3 * std::sin(3.0 * phase);
    case 4:
      return std::fmod(phase, kTwoPi) / 3.0;
    case 5:
      return draws.unit();
    case 6:
      return phase;
    default:
      return std::pow(std::sin(phase), 3.0);
  }
}

/// Sizes, cycles, shapes, offsets and noise of many orders of magnitude, with missing samples.
Record draw_record(Draws& draws) {
  const auto samples = static_cast<std::size_t>(10.0 + draws.decades(1.0, 3.3));
  const double cycles = draws.one_in(10) ? 2.0 * draws.unit() : draws.decades(-0.3, 1.9);
  const double size = draws.one_in(10) ? 0.0 : draws.decades(-2.0, 2.0);
  const double mean = draws.one_in(2) ? 0.0 : 100.0 * (draws.unit() - 0.5);
  const double noise = draws.one_in(2) ? 0.0 : draws.decades(-3.0, 1.0);
  const bool holes = draws.one_in(2);
  const int kind = draws.below(8);
  Record out{{}, {}, 0.02 * cycles / static_cast<double>(samples) + 1e-9};
  for (std::size_t k = 0; k < samples; ++k) {
    const double phase = kTwoPi * cycles * static_cast<double>(k) / static_cast<double>(samples);
    const double value = size * shape(kind, phase, draws) + mean + noise * (draws.unit() - 0.5);
    out.i.push_back(0.1 * value + noise * (draws.unit() - 0.5));
    const double missing = draws.one_in(3) ? std::nan("") : std::numeric_limits<double>::infinity();
    out.v.push_back(holes && draws.one_in(400) ? (draws.one_in(2) ? missing : -missing) : value);
  }
  return out;
}

template <class T>
void said(const base::Outcome<T>& outcome) {
  if (!outcome) CHECK_FALSE(outcome.refusal().reason.empty());
}

void finite(double value) {
  CHECK(std::isfinite(value));
}

void finite(const base::Outcome<double>& outcome) {
  said(outcome);
  if (outcome) finite(*outcome);
}

void finite(const base::Outcome<Bounded>& outcome) {
  said(outcome);
  if (outcome) finite(outcome->value);
}

void finite(const estimate::Quoted& quoted) {
  said(quoted);
  if (!quoted) return;
  finite(quoted->value());
  finite(quoted->standard_uncertainty());
}

void check_channel(const ChannelResult& channel) {
  for (const double value :
       {channel.mean, channel.rms.value, channel.ripple_rms.value, channel.minimum, channel.maximum,
        channel.peak.value, channel.peak_to_peak.value, channel.mean_rectified, channel.thd_floor,
        channel.residual_rms, channel.quantisation_step}) {
    finite(value);
  }
  finite(channel.crest_factor);
  finite(channel.crest_factor_in_band);
  finite(channel.form_factor);
  finite(channel.thd_f);
  finite(channel.thd_r);
  finite(channel.total_distortion);
  for (const Harmonic& harmonic : channel.harmonics) {
    finite(harmonic.rms);
    finite(harmonic.share);
    CHECK(harmonic.phase_deg > -180.0);
    CHECK(harmonic.phase_deg <= 180.0);
  }
  said(channel.groups);
  if (!channel.groups) return;
  for (const GroupedOrder& order : channel.groups->orders) {
    finite(order.group_rms);
    CHECK(order.subgroup_rms_low <= order.subgroup_rms_high);
  }
}

TEST_CASE("random records give finite numbers or a reason") {
  const char* text = std::getenv("LOADSTAIR_SEED");
  const auto seed = static_cast<std::uint64_t>(text == nullptr ? 5 : base::parse_integer(text).value_or(5));
  Draws draws{seed};
  constexpr int kRecords = 400;
  for (int record = 0; record < kRecords; ++record) {
    INFO("seed " << seed << ", record " << record);
    const Record drawn = draw_record(draws);
    Waveform waveform;
    waveform.interval_s = drawn.interval_s;
    waveform.channels = {{.name = "v", .unit = "V", .values = drawn.v},
                         {.name = "i", .unit = "A", .values = drawn.i}};
    waveform.channels[0].clipped_high = draws.one_in(2) ? 1 : 0;
    waveform.channels[0].clipped_low = draws.one_in(2) ? 1 : 0;
    if (!draws.one_in(4)) waveform.voltage = 0;
    if (!draws.one_in(4)) waveform.current = 1;
    AnalysisSettings settings;
    settings.harmonics = 1 + draws.below(100);
    settings.least_cycles = 1 + draws.below(3);
    settings.expected = static_cast<Expected>(draws.below(3));
    if (draws.one_in(3)) settings.crest_band_hz = 2000.0;
    if (draws.one_in(5)) settings.fundamental_hz = 50.0;
    const auto result = analyse(waveform, settings);
    said(result);
    if (!result) continue;
    said(result->fundamental);
    for (const ChannelResult& channel : result->channels) check_channel(channel);
    said(result->power);
    if (result->power) {
      finite(result->power->active_w);
      finite(result->power->power_factor);
      said(result->power->fundamental);
    }
    CaptureAccuracy accuracy;
    accuracy.channels = {ChannelAccuracy{{"probe P1", "", ""}, 0.01, 0.1, 1e-7, {}},
                         ChannelAccuracy{{"probe P2", "", ""}, 0.01, 0.1, 1e-7, {}}};
    const WaveformQuote quoted = quote(*result, accuracy);
    for (const ChannelQuote& channel : quoted.channels) {
      finite(channel.mean);
      finite(channel.rms);
      finite(channel.crest_factor);
      finite(channel.form_factor);
    }
    finite(quoted.power.active_w);
    finite(quoted.power.power_factor);
    finite(quoted.power.nonactive_var);
  }
}

}  // namespace
}  // namespace loadstair::waveform
