// Windows of IEC 61000-4-7 in a record whose frequency drifts, and smoothing over 1.5 s.
#include <catch2/catch.hpp>
#include <cmath>
#include <numbers>
#include <vector>

#include "analysis/waveform/waveform.h"
#include "tests/analysis/random_source.h"

namespace loadstair::waveform {
namespace {

using Catch::Matchers::Contains;

constexpr double kTwoPi = 2.0 * std::numbers::pi;

Waveform one_channel(const std::vector<double>& samples, double interval_s) {
  Waveform waveform;
  waveform.interval_s = interval_s;
  waveform.channels = {{.name = "v", .unit = "V", .values = samples}};
  return waveform;
}

/// 325 V with 5 % of order 5, 2 % of 25 and 1 % of 39; the frequency goes linearly from f to f + change over
/// the record.
std::vector<double> drifting(double frequency_hz, double change_hz, double duration_s, double interval_s) {
  std::vector<double> out;
  const auto samples = static_cast<std::size_t>(std::round(duration_s / interval_s));
  for (std::size_t k = 0; k < samples; ++k) {
    const double t = interval_s * static_cast<double>(k);
    const double angle = kTwoPi * (frequency_hz * t + 0.5 * change_hz * t * t / duration_s);
    out.push_back(325.0 * (std::cos(angle + 0.3) + 0.05 * std::cos(5 * angle) +
                           0.02 * std::cos(25 * angle + 1.0) + 0.01 * std::cos(39 * angle)));
  }
  return out;
}

TEST_CASE("each window takes its own frequency where the record drifts, at 50 and at 60 Hz") {
  for (const double frequency_hz : {49.7, 59.8}) {
    // 0.4 Hz over 4 s: the first and the last window lie 0.4 % from the record's mean, a window changes by
    // 0.04 %.
    const double change_hz = 0.4, duration_s = 4.0, interval_s = 2e-5;
    const auto v = drifting(frequency_hz, change_hz, duration_s, interval_s);
    const auto result = analyse(one_channel(v, interval_s));
    REQUIRE(result);
    const auto& groups = result->channels[0].groups;
    REQUIRE(groups);
    INFO(frequency_hz);
    REQUIRE(groups->windows >= 19);
    double end = groups->window_list.front().first_sample;
    for (const GroupWindow& window : groups->window_list) {
      CHECK(window.first_sample == Approx(end).margin(1e-6));
      end = window.first_sample + window.length_samples;
      const double middle_s = interval_s * (window.first_sample + 0.5 * window.length_samples);
      const double truth = frequency_hz + change_hz * middle_s / duration_s;
      // IEC 61000-4-7 asks for 0.03 %; the mean frequency of the window is met far better.
      CHECK(std::abs(window.frequency_hz / truth - 1.0) < 3e-5);
    }
    for (const auto& [order, share] :
         {std::pair{1, 1.0}, std::pair{5, 0.05}, std::pair{25, 0.02}, std::pair{39, 0.01}}) {
      const GroupedOrder& found = groups->orders[static_cast<std::size_t>(order - 1)];
      const double rms = 325.0 / std::numbers::sqrt2 * share;
      INFO("order " << order);
      // The drift inside a window, 0.02 % at its ends, spreads order 39 by less than a tenth of a line.
      CHECK(found.subgroup_rms == Approx(rms).epsilon(0.001));
      CHECK(found.subgroup_rms_low == Approx(rms).epsilon(0.001));
      CHECK(found.subgroup_rms_high == Approx(rms).epsilon(0.001));
    }
    CHECK(groups->synchronisation < 3e-4);
    CHECK(result->channels[0].standard_decision.ok());
  }
}

TEST_CASE("a frequency that jumps about within its windows allows no decision by a standard") {
  std::vector<double> v;
  tests::RandomSource random{7};
  double angle = 0.0, frequency_hz = 50.0;
  for (int k = 0; k < 40000; ++k) {
    if (k % 400 == 0) frequency_hz = 50.0 + random.uniform(-1.5, 1.5);
    angle += kTwoPi * frequency_hz * 5e-5;
    v.push_back(325.0 * std::sin(angle));
  }
  const auto result = analyse(one_channel(v, 5e-5));
  REQUIRE(result);
  REQUIRE(result->channels[0].groups);
  CHECK(result->channels[0].groups->synchronisation > 3e-4);
  REQUIRE_FALSE(result->channels[0].standard_decision);
  CHECK_THAT(result->channels[0].standard_decision.refusal().reason, Contains("0.03 %"));
}

TEST_CASE("records without groups allow no decision by a standard, with the reason") {
  const auto seven = analyse(one_channel(drifting(50.0, 0.0, 0.145, 2e-5), 2e-5));
  REQUIRE(seven);
  REQUIRE_FALSE(seven->channels[0].standard_decision);
  CHECK(seven->channels[0].standard_decision.refusal().reason == "7 cycles, no grouping");
  CHECK(seven->channels[0].harmonics.size() == 40);
  Waveform clipped = one_channel(drifting(50.0, 0.0, 0.4, 2e-5), 2e-5);
  const auto values = drifting(50.0, 0.0, 0.4, 2e-5);
  clipped.channels[0].values = values;
  clipped.channels[0].range_high = 300.0;
  const auto railed = analyse(clipped);
  REQUIRE(railed);
  REQUIRE_FALSE(railed->channels[0].standard_decision);
  CHECK_THAT(railed->channels[0].standard_decision.refusal().reason, Contains("clipped"));
}

TEST_CASE("smoothing is a first-order low-pass of 1.5 s over the windows") {
  // Order 5 steps from 1 % to 3 % after 2 of 4 s. Per window y += (x - y)/8.012 (coefficients of IEC
  // 61000-4-7 from memory; 1 - exp(-0.2/1.5) is 1/8.0112).
  std::vector<double> v;
  for (int k = 0; k < 80000; ++k) {
    const double angle = kTwoPi * 50.0 * 5e-5 * k;
    v.push_back(325.0 * (std::cos(angle) + (k < 40000 ? 0.01 : 0.03) * std::cos(5 * angle)));
  }
  const auto result = analyse(one_channel(v, 5e-5));
  REQUIRE(result);
  const auto& groups = result->channels[0].groups;
  REQUIRE(groups);
  REQUIRE(groups->windows == 20);
  REQUIRE(groups->smoothed);
  double state = 1.0, mean = 0.0;
  for (int w = 0; w < 20; ++w) {
    state = 1.0 / 8.012 * (w < 10 ? 1.0 : 3.0) + 7.012 / 8.012 * state;
    mean += state / 20.0;
  }
  const double unit = 3.25 / std::numbers::sqrt2;
  const SmoothedOrder& fifth = (*groups->smoothed)[4];
  CHECK(fifth.subgroup_rms_high == Approx(state * unit).epsilon(2e-4));
  CHECK(fifth.group_rms_high == Approx(state * unit).epsilon(2e-4));
  CHECK(fifth.subgroup_rms == Approx(mean * unit).epsilon(2e-4));
  const std::vector<double> shorter(v.begin(), v.begin() + 20000);
  const auto short_record = analyse(one_channel(shorter, 5e-5));
  REQUIRE(short_record);
  CHECK_THAT(short_record->channels[0].groups->smoothed.refusal().reason,
             Contains("1.00 s") && Contains("1.5 s"));
}

}  // namespace
}  // namespace loadstair::waveform
