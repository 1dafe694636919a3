#include "analysis/waveform/waveform.h"

#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <limits>
#include <numbers>
#include <random>
#include <vector>

namespace loadstair::waveform {
namespace {

using Catch::Matchers::Contains;

constexpr double kPi = std::numbers::pi;

struct Line {
  int order;
  double amplitude, phase_rad;  // of the cosine
};

const std::vector<Line> kLines = {{1, 325.0, -1.2}, {3, 6.5, 0.4},  {5, 3.2, 2.0},
                                  {7, 1.1, -0.7},   {13, 0.5, 1.0}, {40, 0.2, 0.1}};

/// mean + sum of lines at a frequency, sampled every interval_s.
std::vector<double> sampled(double mean, const std::vector<Line>& lines, double frequency_hz,
                            double interval_s, std::size_t samples) {
  std::vector<double> out(samples, mean);
  for (const Line& line : lines) {
    for (std::size_t k = 0; k < samples; ++k) {
      out[k] += line.amplitude *
                std::cos(2.0 * kPi * frequency_hz * line.order * interval_s * static_cast<double>(k) +
                         line.phase_rad);
    }
  }
  return out;
}

Waveform one_channel(const std::vector<double>& samples, double interval_s) {
  Waveform waveform;
  waveform.interval_s = interval_s;
  waveform.channels = {{.name = "v", .unit = "V", .values = samples}};
  return waveform;
}

TEST_CASE("off the grid, results are those of the sum of lines that was sampled") {
  const double frequency_hz = GENERATE(49.3, 50.7, 61.7, 50.0 * 3.5 / 3.0, 50.000123);
  const std::size_t samples = GENERATE(std::size_t{4001}, std::size_t{20000});
  const double duration_s = GENERATE(0.07, 0.2, 0.487);
  const double interval_s = duration_s / static_cast<double>(samples);
  const auto v = sampled(0.8, kLines, frequency_hz, interval_s, samples);
  const auto result = analyse(one_channel(v, interval_s));
  INFO(frequency_hz << " Hz, " << samples << " samples over " << duration_s << " s");
  REQUIRE(result);
  REQUIRE(result->fundamental);
  CHECK(result->fundamental->frequency_hz == Approx(frequency_hz).epsilon(3e-9));
  CHECK(result->window.cycles == static_cast<int>(std::floor(duration_s * frequency_hz + 1e-9)));
  const ChannelResult& channel = result->channels[0];
  // Lines that are there come out to 1e-8 of the largest one. Sums of squares miss at the ends a share (2 pi
  // h/P)^6 of what order h contributes at P samples a cycle, spread over the record.
  constexpr double kLineTolerance = 325.0 * 1e-8;
  const double per_cycle = 1.0 / (frequency_hz * interval_s);
  double tolerance = 325.0 * 1e-10;
  for (const Line& line : kLines) {
    tolerance += line.amplitude * std::pow(std::min(2.0, 2.0 * kPi * line.order / per_cycle), 6.0) /
                 static_cast<double>(samples);
  }
  double square = 0.8 * 0.8;
  double harmonics = 0.0;
  for (const Line& line : kLines) {
    square += 0.5 * line.amplitude * line.amplitude;
    if (line.order > 1) harmonics += line.amplitude * line.amplitude;
    const Harmonic& found = channel.harmonics[static_cast<std::size_t>(line.order - 1)];
    INFO("order " << line.order);
    CHECK(std::abs(found.rms - line.amplitude / std::numbers::sqrt2) < kLineTolerance);
    const double turn = std::remainder(found.phase_deg * kPi / 180.0 - line.phase_rad, 2.0 * kPi);
    // The frequency's 3e-9 turns the phase over the record.
    CHECK(std::abs(turn) <
          3.0 * kLineTolerance / line.amplitude + 2.0 * kPi * line.order * result->window.cycles * 3e-9);
  }
  CHECK(std::abs(channel.mean - 0.8) < 2.0 * tolerance);
  CHECK(std::abs(channel.rms.value - std::sqrt(square)) < 4.0 * tolerance);
  REQUIRE(channel.thd_f);
  CHECK(std::abs(*channel.thd_f - std::sqrt(harmonics) / 325.0) < 10.0 * kLineTolerance / 325.0);
  CHECK(std::abs(*channel.total_distortion - std::sqrt(harmonics) / 325.0) <
        20.0 * tolerance / 325.0 * std::sqrt(harmonics) + 1e-6);
}

TEST_CASE("results scale with the signal and shift with its offset") {
  const double interval_s = 0.2 / 7001;
  const auto v = sampled(0.0, kLines, 49.3, interval_s, 7001);
  Waveform waveform = one_channel(v, interval_s);
  const auto plain = analyse(waveform);
  waveform.channels[0].scale = -200.0;
  waveform.channels[0].offset = 35.0;
  const auto scaled = analyse(waveform);
  REQUIRE((plain && scaled));
  const ChannelResult& a = plain->channels[0];
  const ChannelResult& b = scaled->channels[0];
  CHECK(scaled->fundamental->frequency_hz == Approx(plain->fundamental->frequency_hz).epsilon(1e-10));
  CHECK(b.ripple_rms.value == Approx(200.0 * a.ripple_rms.value).epsilon(1e-9));
  CHECK(b.mean == Approx(35.0 - 200.0 * a.mean).epsilon(1e-6));
  CHECK(b.maximum == Approx(35.0 - 200.0 * a.minimum));
  CHECK(*b.thd_f == Approx(*a.thd_f).epsilon(1e-8));
  CHECK(std::abs(std::remainder(b.harmonics[0].phase_deg - a.harmonics[0].phase_deg - 180.0, 360.0)) < 1e-6);
}

TEST_CASE("noise and 8-bit steps leave results within what they can do") {
  const double interval_s = 0.1987 / 10000;
  const std::uint64_t seed = 99;
  std::mt19937_64 random{seed};
  INFO("seed " << seed);
  auto v = sampled(0.0, kLines, 50.3, interval_s, 10000);
  const double step = 2.0 * 400.0 / 256.0;
  for (double& sample : v) {
    sample += 6.0 * (static_cast<double>(random() >> 11) * 0x1p-53 - 0.5);
    sample = step * std::round(sample / step);
  }
  const auto result = analyse(one_channel(v, interval_s));
  REQUIRE(result);
  const ChannelResult& channel = result->channels[0];
  CHECK(channel.quantisation_step == Approx(step));
  // Uniform noise of 6 V and a step of 3.1 V: deviation sqrt(36/12 + step^2/12) = 1.95 V on a sample, and so
  // is what is neither direct component nor a harmonic.
  const double deviation = std::sqrt(3.0 + step * step / 12.0);
  CHECK(channel.residual_rms == Approx(deviation).epsilon(0.05));
  // A single line's RMS moves by deviation/sqrt(N) per part: five of that.
  const double line = 5.0 * deviation / std::sqrt(10000.0);
  for (const Line& wanted : kLines) {
    CHECK(std::abs(channel.harmonics[static_cast<std::size_t>(wanted.order - 1)].rms -
                   wanted.amplitude / std::numbers::sqrt2) < line);
  }
  // Phase scatter deviation sqrt(2/N)/325 over about 10 cycles.
  CHECK(std::abs(result->fundamental->frequency_hz - 50.3) <
        5.0 * result->fundamental->standard_uncertainty_hz + 1e-9);
  CHECK(result->fundamental->standard_uncertainty_hz < 0.005);
  // The noise is taken from the median of some 350 lines between the harmonics: its power to 1/(ln 2 sqrt
  // 350) = 7.7 %, its RMS to 3.9 %; three of that.
  CHECK(channel.thd_floor ==
        Approx(deviation * std::sqrt(2.0 / 10000.0 * 39.0) / (325.0 / std::numbers::sqrt2)).epsilon(0.12));
  CHECK(channel.noise_rms == Approx(deviation).epsilon(0.05));
  // Order 40 has 0.14 V, a line of noise 0.028 V; the even orders hold nothing.
  CHECK(channel.line_floor_rms == Approx(3.0 * deviation * std::sqrt(2.0 / 10000.0)).epsilon(0.12));
  CHECK_FALSE(channel.harmonics[39].below_floor);
  const auto& below = channel.orders_below_floor;
  CHECK(std::count_if(below.begin(), below.end(), [](int order) { return order % 2 == 0; }) == 19);
}

TEST_CASE("groups are given for ten cycles at 50 Hz and twelve at 60 Hz, else why not") {
  const auto groups_of = [](double frequency_hz, double duration_s) {
    const double interval_s = duration_s / 10000.0;
    const auto v = sampled(0.0, kLines, frequency_hz, interval_s, 10000);
    const auto result = analyse(one_channel(v, interval_s));
    REQUIRE(result);
    return result->channels[0].groups;
  };
  const auto seven = groups_of(50.2, 0.1499);
  REQUIRE_FALSE(seven);
  CHECK(seven.refusal().reason == "7 cycles, no grouping");
  CHECK_THAT(groups_of(400.0, 0.1).refusal().reason, Contains("400.0 Hz, no grouping"));
  for (const auto& [frequency_hz, cycles] : {std::pair{49.6, 10}, std::pair{60.3, 12}}) {
    const auto groups = groups_of(frequency_hz, 0.43);
    INFO(frequency_hz);
    REQUIRE(groups);
    CHECK(groups->cycles_per_window == cycles);
    CHECK(groups->windows == 2);
    // A steady sum of harmonics has nothing between them: groups are the lines, to the resampling's 1e-5 of
    // order 40.
    for (const Line& line : kLines) {
      const GroupedOrder& order = groups->orders[static_cast<std::size_t>(line.order - 1)];
      CHECK(std::abs(order.group_rms - line.amplitude / std::numbers::sqrt2) < 2e-5);
      CHECK(std::abs(order.subgroup_rms - line.amplitude / std::numbers::sqrt2) < 2e-5);
      CHECK(order.group_rms_low <= order.group_rms);
      CHECK(order.group_rms_high >= order.group_rms);
    }
    CHECK(groups->orders[1].group_rms < 1e-4);
  }
}

TEST_CASE("a direct record has mean and ripple and says that it has no fundamental") {
  const std::uint64_t seed = 3;
  std::mt19937_64 random{seed};
  std::vector<double> v(2000), drift(2000);
  for (std::size_t k = 0; k < v.size(); ++k) {
    const double noise = static_cast<double>(random() >> 11) * 0x1p-53 - 0.5;
    v[k] = 385.0 + 0.2 * noise;
    drift[k] = 385.0 + 2.0 * static_cast<double>(k) / 2000.0 + 0.02 * noise;
  }
  for (const auto& samples : {v, drift, std::vector<double>(2000, 12.0)}) {
    const auto result = analyse(one_channel(samples, 1e-5));
    REQUIRE(result);
    REQUIRE_FALSE(result->fundamental);
    CHECK_THAT(result->fundamental.refusal().reason, Contains("no fundamental"));
    CHECK(result->window.cycles == 0);
    const ChannelResult& channel = result->channels[0];
    CHECK(channel.harmonics.empty());
    CHECK_FALSE(channel.thd_f);
    CHECK(std::isfinite(channel.ripple_rms.value));
    REQUIRE(channel.crest_factor);
    CHECK(channel.crest_factor->value >= 1.0);
  }
  // Uniform noise of width 0.2: deviation 0.2/sqrt(12).
  const auto noisy = analyse(one_channel(v, 1e-5));
  CHECK(noisy->channels[0].ripple_rms.value == Approx(0.2 / std::sqrt(12.0)).epsilon(0.05));

  AnalysisSettings settings;
  settings.expected = Expected::alternating;
  CHECK_FALSE(analyse(one_channel(v, 1e-5), settings));
  // A direct input with ripple at twice the mains frequency has that as its fundamental; taken as direct it
  // has none.
  std::vector<double> ripple = sampled(385.0, {{1, 4.0, 0.0}}, 100.0, 1e-4, 2000);
  CHECK(analyse(one_channel(ripple, 1e-4))->fundamental->frequency_hz == Approx(100.0));
  settings.expected = Expected::direct;
  const auto direct = analyse(one_channel(ripple, 1e-4), settings);
  REQUIRE(direct);
  CHECK_FALSE(direct->fundamental);
  CHECK(direct->channels[0].ripple_rms.value == Approx(4.0 / std::numbers::sqrt2).epsilon(1e-6));
}

TEST_CASE("power of direct voltage and rippling current counts the ripple") {
  // P = V I + v1 i1/2 cos(phase): closed form.
  const auto v = sampled(385.0, {{1, 6.0, 0.3}}, 100.0, 2e-5, 10000);
  const auto i = sampled(1.6, {{1, 1.4, 2.4}}, 100.0, 2e-5, 10000);
  Waveform waveform = one_channel(v, 2e-5);
  waveform.channels.push_back({.name = "i", .unit = "A", .values = i});
  waveform.voltage = 0;
  waveform.current = 1;
  for (const Expected expected : {Expected::either, Expected::direct}) {
    AnalysisSettings settings;
    settings.expected = expected;
    const auto result = analyse(waveform, settings);
    REQUIRE(result);
    REQUIRE(result->power);
    const double ripple = 0.5 * 6.0 * 1.4 * std::cos(2.1);
    CHECK(result->power->ripple_w == Approx(ripple).epsilon(1e-9));
    CHECK(result->power->active_w == Approx(385.0 * 1.6 + ripple).epsilon(1e-10));
  }
}

TEST_CASE("a known delay between the channels is taken out of the power") {
  const double f = 50.0, delay_s = 25e-6, interval_s = 1e-5;
  const std::vector<Line> current = {{1, 4.0, -1.6}, {3, 0.5, 0.0}, {7, 0.3, 2.0}};
  const auto v = sampled(0.0, kLines, f, interval_s, 20000);
  std::vector<Line> late = current;
  for (Line& line : late) line.phase_rad -= 2.0 * kPi * f * line.order * delay_s;
  const auto i = sampled(0.0, current, f, interval_s, 20000);
  const auto i_late = sampled(0.0, late, f, interval_s, 20000);
  Waveform waveform = one_channel(v, interval_s);
  waveform.channels.push_back({.name = "i", .unit = "A", .values = i});
  waveform.voltage = 0;
  waveform.current = 1;
  const auto truth = analyse(waveform);
  waveform.channels[1].values = i_late;
  const auto wrong = analyse(waveform);
  waveform.channels[1].delay_s = delay_s;
  const auto corrected = analyse(waveform);
  REQUIRE((truth && wrong && corrected));
  CHECK(std::abs(wrong->power->active_w - truth->power->active_w) > 1.0);
  CHECK(corrected->power->active_w == Approx(truth->power->active_w).epsilon(1e-10));
  CHECK(corrected->power->fundamental->reactive_var ==
        Approx(truth->power->fundamental->reactive_var).epsilon(1e-9));
  CHECK(corrected->power->power_factor == Approx(truth->power->power_factor).epsilon(1e-10));
}

TEST_CASE("clipped samples make lower bounds, blank ones are filled, too many are refused") {
  const auto whole = sampled(0.0, {{1, 100.0, 0.0}}, 50.0, 1e-4, 2000);
  std::vector<double> clipped = whole;
  std::size_t high = 0, low = 0;
  for (double& sample : clipped) {
    if (sample > 90.0) ++high, sample = std::numeric_limits<double>::infinity();
    if (sample < -90.0) ++low, sample = std::nan("");
  }
  Waveform waveform = one_channel(clipped, 1e-4);
  waveform.channels[0].clipped_high = high;
  waveform.channels[0].clipped_low = low;
  const auto bound = analyse(waveform);
  REQUIRE(bound);
  CHECK(bound->channels[0].peak.lower_bound);
  CHECK(bound->channels[0].rms.lower_bound);
  CHECK(bound->channels[0].crest_factor->lower_bound);
  CHECK(bound->channels[0].peak.value <= 90.0);
  CHECK(bound->channels[0].peak.value > 85.0);
  CHECK(bound->channels[0].rms.value < 100.0 / std::numbers::sqrt2);
  CHECK(bound->channels[0].rms.value > 62.0);
  REQUIRE_FALSE(bound->remarks.empty());
  CHECK_THAT(bound->remarks.front(), Contains("samples clipped") && Contains("lower bounds"));

  std::vector<double> railed = whole;
  for (double& sample : railed) sample = std::clamp(sample, -80.0, 80.0);
  Waveform rails = one_channel(railed, 1e-4);
  CHECK_FALSE(analyse(rails)->channels[0].peak.lower_bound);
  rails.channels[0].range_low = -80.0;
  rails.channels[0].range_high = 80.0;
  CHECK(analyse(rails)->channels[0].peak.lower_bound);

  std::vector<double> holes = whole;
  for (const std::size_t k : {5u, 700u, 701u, 1999u}) holes[k] = std::nan("");
  const auto filled = analyse(one_channel(holes, 1e-4));
  REQUIRE(filled);
  CHECK(filled->channels[0].missing == 4);
  CHECK_FALSE(filled->channels[0].peak.lower_bound);
  // Four samples of 2000, each off by at most the step between neighbours, 3 V.
  CHECK(filled->channels[0].rms.value == Approx(100.0 / std::numbers::sqrt2).epsilon(1e-4));
  CHECK_THAT(filled->remarks.front(), Contains("4 blank samples"));

  for (std::size_t k = 100; k < 150; ++k) holes[k] = std::nan("");
  const auto refused = analyse(one_channel(holes, 1e-4));
  REQUIRE_FALSE(refused);
  CHECK(
      refused.refusal().text() ==
      "channel v: 54 of 2000 samples are blank; more than 1 % cannot be filled in: export the record again");
  const std::vector<double> nothing(100, std::nan(""));
  CHECK_FALSE(analyse(one_channel(nothing, 1e-4)));
}

TEST_CASE("records that cannot be analysed are refused with what to do") {
  const auto few = sampled(0.0, {{1, 100.0, 0.0}}, 50.0, 1e-4, 290);
  const auto refused = analyse(one_channel(few, 1e-4));
  REQUIRE_FALSE(refused);
  CHECK_THAT(refused.refusal().reason,
             Contains("1.45 cycles of 50.00 Hz are too few; record 2 whole cycles, 0.0400 s"));

  const auto coarse = sampled(0.0, {{1, 100.0, 0.0}}, 50.0, 1.0 / 300.0, 300);
  CHECK_THAT(analyse(one_channel(coarse, 1.0 / 300.0)).refusal().reason, Contains("6.0 samples a cycle"));

  const auto crest = sampled(0.0, {{1, 100.0, 0.0}}, 50.0, 1.0 / 1000.0, 300);
  const auto sampled_slowly = analyse(one_channel(crest, 1.0 / 1000.0));
  REQUIRE(sampled_slowly);
  CHECK_THAT(sampled_slowly->channels[0].crest_factor.refusal().reason, Contains("10.0 samples on a crest"));
  CHECK(sampled_slowly->channels[0].harmonics.size() == 9);
  CHECK_THAT(sampled_slowly->remarks.back(), Contains("orders up to 9 of 40"));

  CHECK_FALSE(analyse({}));
  Waveform unequal = one_channel(few, 1e-4);
  unequal.channels.push_back({.name = "i", .unit = "A", .values = coarse});
  CHECK_THAT(analyse(unequal).refusal().text(), Contains("channel i: 300 samples, but 290 in channel v"));
  CHECK_FALSE(analyse(one_channel(few, 0.0)));
  CHECK_FALSE(analyse(one_channel({1.0, 2.0}, 1e-4)));
  Waveform named = one_channel(crest, 1e-3);
  named.voltage = 3;
  CHECK_FALSE(analyse(named));
}

TEST_CASE("the crest factor in a band leaves out what lies beyond it") {
  // A sine with a spike of switching at order 200; in a band of 2 kHz only the sine is left.
  const double interval_s = 0.1 / 20000;
  auto v = sampled(0.0, {{1, 325.0, 0.0}, {200, 30.0, 0.0}}, 50.0, interval_s, 20000);
  AnalysisSettings settings;
  settings.crest_band_hz = 2000.0;
  const auto result = analyse(one_channel(v, interval_s), settings);
  REQUIRE(result);
  REQUIRE(result->channels[0].crest_factor_in_band);
  CHECK(result->channels[0].crest_factor_in_band->value == Approx(std::numbers::sqrt2).epsilon(1e-9));
  CHECK(result->channels[0].crest_factor->value ==
        Approx(355.0 / std::hypot(325.0, 30.0) * std::numbers::sqrt2).epsilon(1e-6));
  settings.crest_band_hz = 20.0;
  CHECK_FALSE(analyse(one_channel(v, interval_s), settings)->channels[0].crest_factor_in_band);
}

TEST_CASE("all channels share the voltage's fundamental") {
  // The current's largest line is its third harmonic; the window is still that of the voltage.
  const double interval_s = 0.1 / 9000;
  const auto v = sampled(0.0, {{1, 325.0, 0.0}}, 50.4, interval_s, 9000);
  const auto i = sampled(0.0, {{1, 1.0, 0.0}, {3, 2.0, 1.0}}, 50.4, interval_s, 9000);
  Waveform waveform = one_channel(v, interval_s);
  waveform.channels.push_back({.name = "i", .unit = "A", .values = i});
  waveform.voltage = 0;
  const auto result = analyse(waveform);
  REQUIRE(result);
  CHECK(result->fundamental->frequency_hz == Approx(50.4).epsilon(1e-9));
  CHECK(*result->channels[1].thd_f == Approx(2.0).epsilon(1e-8));
  CHECK_FALSE(result->power);
  AnalysisSettings settings;
  settings.fundamental_hz = 50.0;
  Waveform alone = one_channel(i, interval_s);
  // On its own the current's largest line is taken, pulled a little by the subharmonic beside it.
  CHECK(analyse(alone)->fundamental->frequency_hz == Approx(151.2).epsilon(2e-3));
  CHECK(analyse(alone, settings)->fundamental->frequency_hz == Approx(50.4).epsilon(1e-9));
}

}  // namespace
}  // namespace loadstair::waveform
