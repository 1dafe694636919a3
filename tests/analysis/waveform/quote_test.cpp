#include "analysis/waveform/quote.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <functional>
#include <numbers>
#include <vector>

namespace loadstair::waveform {
namespace {

using Catch::Matchers::Contains;

constexpr double kPi = std::numbers::pi;

struct Pair {
  std::vector<double> v, i;
};

Pair record() {
  Pair out;
  for (int k = 0; k < 10000; ++k) {
    const double a = 2.0 * kPi * k / 1000.0;
    out.v.push_back(325.0 * std::sin(a) + 8.0 * std::sin(3 * a + 0.4) + 2.0);
    out.i.push_back(3.7 * std::sin(a - 0.5) + 0.6 * std::sin(3 * a + 1.0) + 0.05);
  }
  return out;
}

Waveform waveform_of(const Pair& pair) {
  Waveform waveform;
  waveform.interval_s = 2e-5;
  waveform.channels = {{.name = "v", .unit = "V", .values = pair.v},
                       {.name = "i", .unit = "A", .values = pair.i}};
  waveform.voltage = 0;
  waveform.current = 1;
  return waveform;
}

/// Standard uncertainty by moving each declared error by its own standard uncertainty in the record itself
/// and analysing again: a slow second way that knows nothing of derivatives.
double by_moving(const Pair& pair, double gain, double offset_v, double offset_i, double delay_s,
                 const std::function<double(const WaveformResult&)>& of) {
  const double value = of(analyse(waveform_of(pair)).value());
  double variance = 0.0;
  const auto add = [&](const std::function<void(Waveform&)>& change, double size) {
    Waveform waveform = waveform_of(pair);
    change(waveform);
    const double moved = of(analyse(waveform).value());
    variance += std::pow((moved - value) * size, 2.0);
  };
  // Small enough for the linear part: 1/100 of the uncertainty, scaled back.
  constexpr double kPart = 0.01;
  const double to_u = 1.0 / std::numbers::sqrt3;
  add([&](Waveform& w) { w.channels[0].scale = 1.0 + kPart * gain * to_u; }, 1.0 / kPart);
  add([&](Waveform& w) { w.channels[1].scale = 1.0 + kPart * gain * to_u; }, 1.0 / kPart);
  add([&](Waveform& w) { w.channels[0].offset = kPart * offset_v * to_u; }, 1.0 / kPart);
  add([&](Waveform& w) { w.channels[1].offset = kPart * offset_i * to_u; }, 1.0 / kPart);
  add([&](Waveform& w) { w.channels[0].delay_s = kPart * delay_s * to_u; }, 1.0 / kPart);
  add([&](Waveform& w) { w.channels[1].delay_s = kPart * delay_s * to_u; }, 1.0 / kPart);
  return std::sqrt(variance);
}

TEST_CASE("quoted uncertainties are what moving gain, offset and delay does to the results") {
  const Pair pair = record();
  const double gain = 0.02, offset_v = 1.5, offset_i = 0.02, delay_s = 1e-6;
  CaptureAccuracy accuracy;
  accuracy.channels = {ChannelAccuracy{{"probe P1", "ac voltage", ""}, gain, offset_v, delay_s, {}},
                       ChannelAccuracy{{"probe P2", "ac current", ""}, gain, offset_i, delay_s, {}}};
  accuracy.occasion = {"run 1", "step 1"};
  const auto result = analyse(waveform_of(pair));
  REQUIRE(result);
  const WaveformQuote quoted = quote(*result, accuracy);
  const auto check = [&](const char* name, const estimate::Quoted& got,
                         const std::function<double(const WaveformResult&)>& of, double tolerance = 1e-3) {
    INFO(name);
    REQUIRE(got);
    CHECK(got->value() == Approx(of(*result)).epsilon(1e-12));
    CHECK(got->standard_uncertainty() ==
          Approx(by_moving(pair, gain, offset_v, offset_i, delay_s, of)).epsilon(tolerance));
  };
  check("mean", quoted.channels[0].mean, [](const auto& r) { return r.channels[0].mean; });
  check("rms", quoted.channels[0].rms, [](const auto& r) { return r.channels[0].rms.value; });
  check("ripple", quoted.channels[0].ripple_rms,
        [](const auto& r) { return r.channels[0].ripple_rms.value; });
  check("peak", quoted.channels[0].peak, [](const auto& r) { return r.channels[0].peak.value; });
  check("crest", quoted.channels[0].crest_factor,
        [](const auto& r) { return r.channels[0].crest_factor->value; });
  check("P", quoted.power.active_w, [](const auto& r) { return r.power->active_w; });
  check("ripple power", quoted.power.ripple_w, [](const auto& r) { return r.power->ripple_w; });
  check("S", quoted.power.apparent_va, [](const auto& r) { return r.power->apparent_va; });
  check("PF", quoted.power.power_factor, [](const auto& r) { return r.power->power_factor; });
  check("N", quoted.power.nonactive_var, [](const auto& r) { return r.power->nonactive_var; });
  check("displacement", quoted.power.displacement_power_factor,
        [](const auto& r) { return r.power->fundamental->displacement_power_factor; });
  // Gains cancel in the power factor: its relative uncertainty is far below that of the power.
  CHECK(quoted.power.power_factor->standard_uncertainty() / quoted.power.power_factor->value() <
        0.2 * quoted.power.active_w->standard_uncertainty() / quoted.power.active_w->value());
}

TEST_CASE("with nothing declared every quote says that its uncertainty is not known") {
  const Pair pair = record();
  const auto result = analyse(waveform_of(pair));
  REQUIRE(result);
  const WaveformQuote quoted = quote(*result, {});
  CHECK_THAT(quoted.frequency_hz.refusal().reason, Contains("uncertainty not known"));
  CHECK_THAT(quoted.channels[0].rms.refusal().reason, Contains("uncertainty not known"));
  CHECK_THAT(quoted.power.active_w.refusal().reason, Contains("uncertainty not known"));
  CaptureAccuracy one;
  one.channels = {ChannelAccuracy{{"probe P1", "ac voltage", ""}, 0.02, 0.0, 0.0, {}}, std::nullopt};
  one.timebase = 1e-4;
  const WaveformQuote half = quote(*result, one);
  CHECK(half.channels[0].rms);
  CHECK_FALSE(half.channels[1].rms);
  CHECK_FALSE(half.power.active_w);
  REQUIRE(half.frequency_hz);
  CHECK(half.frequency_hz->standard_uncertainty() == Approx(50.0 * 1e-4 / std::numbers::sqrt3).epsilon(1e-6));
}

TEST_CASE("a clipped channel is never quoted") {
  Pair pair = record();
  for (double& v : pair.v) v = std::min(v, 300.0);
  Waveform waveform = waveform_of(pair);
  waveform.channels[0].range_high = 300.0;
  const auto result = analyse(waveform);
  REQUIRE(result);
  CaptureAccuracy accuracy;
  accuracy.channels = {ChannelAccuracy{{"probe P1", "ac voltage", ""}, 0.02, 0.0, 0.0, {}},
                       ChannelAccuracy{{"probe P2", "ac current", ""}, 0.02, 0.0, 0.0, {}}};
  const WaveformQuote quoted = quote(*result, accuracy);
  CHECK_THAT(quoted.channels[0].rms.refusal().reason, Contains("lower bound"));
  CHECK_THAT(quoted.power.active_w.refusal().reason, Contains("lower bound"));
  CHECK(quoted.channels[1].rms);
}

}  // namespace
}  // namespace loadstair::waveform
