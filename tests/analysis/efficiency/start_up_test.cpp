#include "analysis/efficiency/start_up.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <functional>
#include <limits>
#include <numbers>

#include "analysis/random_source.h"

namespace efficiency = loadstair::efficiency;
using loadstair::tests::RandomSource;

namespace {

/// A step at 10 ms; `response` gets the time since then.
efficiency::Envelope record(double interval_s, double length_s,
                            const std::function<double(double)>& response) {
  efficiency::Envelope out;
  out.interval_s = interval_s;
  for (double t = 0; t < length_s; t += interval_s) out.values.push_back(t < 0.01 ? 0.0 : response(t - 0.01));
  return out;
}

efficiency::StartUpSettings settings() {
  efficiency::StartUpSettings out;
  out.name = "record";
  out.event_s = 0.01;
  return out;
}

}  // namespace

TEST_CASE("first order: rise time ln 9 tau, settling ln 50 tau, delay ln(1/0.9) tau, no overshoot") {
  const double tau = 0.01;
  const auto found = efficiency::start_up(
      record(1e-5, 0.15, [=](double t) { return 12 * (1 - std::exp(-t / tau)); }), settings());
  REQUIRE(found);
  // Textbook: 10-90 % of a first-order response takes ln 9 = 2.197 time constants.
  CHECK(found->rise_time->value() == Approx(std::log(9.0) * tau).epsilon(1e-3));
  CHECK(found->settling_time->value() == Approx(std::log(50.0) * tau).epsilon(2e-3));
  CHECK(found->delay->value() == Approx(-std::log(0.9) * tau).epsilon(2e-2));
  CHECK(found->overshoot->value() < 1e-4);
  CHECK(found->monotonic);
  CHECK(found->final == Approx(12).epsilon(1e-4));
  // Half an interval at either end, rectangular; the tail is all but quiet.
  CHECK(found->rise_time->standard_uncertainty() == Approx(1e-5 / std::sqrt(6.0)).epsilon(0.05));
}

TEST_CASE("second order: overshoot exp(-pi zeta / sqrt(1 - zeta^2))") {
  for (const double zeta : {0.2, 0.4, 0.6, 0.8}) {
    const double wn = 500;
    const double root = std::sqrt(1 - zeta * zeta);
    const auto found = efficiency::start_up(
        record(2e-5, 0.2,
               [=](double t) {
                 const double wd = wn * root;
                 return 5 *
                        (1 - std::exp(-zeta * wn * t) * (std::cos(wd * t) + zeta / root * std::sin(wd * t)));
               }),
        settings());
    REQUIRE(found);
    CAPTURE(zeta);
    const double expected = std::exp(-std::numbers::pi * zeta / root);
    CHECK(found->overshoot->value() == Approx(expected).epsilon(1e-3));
    CHECK(found->monotonic);  // the overshoot comes after the rise
  }
}

TEST_CASE("a dip on the way up is not monotonic; noise within the tolerance is") {
  const auto ramp = [](double t) { return std::min(12.0, 12 * t / 0.05); };
  auto dipped = record(1e-4, 0.2, [&](double t) { return ramp(t) - (t > 0.02 && t < 0.024 ? 1.8 : 0.0); });
  const auto found = efficiency::start_up(dipped, settings());
  REQUIRE(found);
  CHECK_FALSE(found->monotonic);
  CHECK(found->deepest_fall == Approx(1.8 / 12).epsilon(0.03));
  CHECK(found->text.find("not monotonic") != std::string::npos);
  RandomSource random{loadstair::tests::seed_of_tests()};
  const auto noisy = efficiency::start_up(
      record(1e-4, 0.2, [&](double t) { return ramp(t) + 0.01 * random.uniform(-1, 1); }), settings());
  REQUIRE(noisy);
  CHECK(noisy->monotonic);
  // 80 % of a ramp of 50 ms; the noise of 0.01 V is 0.04 ms of it.
  CHECK(noisy->rise_time->value() == Approx(0.04).epsilon(5e-3));
  // Uniform noise of 0.01 V has no overshoot that can be told from it.
  CHECK(noisy->overshoot->value() < 0.01 / 12);
}

TEST_CASE("records that show no start, never settle or are too coarse are refused") {
  const auto high = efficiency::start_up(record(1e-3, 0.2, [](double) { return 12.0; }), settings());
  REQUIRE(high);  // a step between two samples: only its rise time is not measured
  CHECK_FALSE(high->rise_time);
  CHECK(high->rise_time.refusal().reason.find("samples between 10 and 90 %") != std::string::npos);
  efficiency::Envelope started{0, 1e-3, std::vector<double>(200, 12.0)};
  CHECK(efficiency::start_up(started, settings()).refusal().reason ==
        "the record begins above 10 % of its final value: it shows no start");
  CHECK_FALSE(efficiency::shows_a_start(started));
  const auto climbing = efficiency::start_up(record(1e-3, 0.2, [](double t) { return 100 * t; }), settings());
  CHECK(climbing.refusal().reason.find("never settles") != std::string::npos);
  CHECK_FALSE(efficiency::start_up(record(1e-3, 0.015, [](double) { return 12.0; }), settings()));
  const auto nothing = efficiency::start_up(record(1e-3, 0.2, [](double) { return 0.0; }), settings());
  CHECK_FALSE(nothing);
  auto unknown = settings();
  unknown.event_s.reset();
  const auto without =
      efficiency::start_up(record(1e-4, 0.2, [](double t) { return std::min(1.0, t / 0.01); }), unknown);
  REQUIRE(without);
  CHECK_FALSE(without->delay);
  CHECK(without->settling_time);
}

TEST_CASE("the envelope of a sine is its RMS, also where half cycles end between samples") {
  for (const double hertz : {50.0, 49.3, 61.7}) {
    std::vector<double> samples;
    for (int i = 0; i < 4000; ++i) {
      samples.push_back(std::numbers::sqrt2 * 230 * std::sin(2 * std::numbers::pi * hertz * 5e-5 * i + 0.7));
    }
    const auto envelope = efficiency::half_cycle_rms(samples, 5e-5, hertz);
    REQUIRE(envelope);
    CHECK(envelope->interval_s == Approx(0.5 / hertz).epsilon(1e-12));
    CHECK(envelope->values.size() == static_cast<std::size_t>(0.19995 * 2 * hertz));
    for (const double value : envelope->values) CHECK(value == Approx(230).epsilon(2e-4));
  }
  // A ramp of 0.4 s on 50 Hz: 80 % of it between 10 and 90 %.
  std::vector<double> ramped;
  for (int i = 0; i < 24000; ++i) {
    const double t = 5e-5 * i;
    const double size = t < 0.1 ? 0.0 : std::min(1.0, (t - 0.1) / 0.4);
    ramped.push_back(325 * size * std::sin(2 * std::numbers::pi * 50 * t));
  }
  const auto envelope = efficiency::half_cycle_rms(ramped, 5e-5, 50);
  REQUIRE(envelope);
  const auto found = efficiency::start_up(*envelope, settings());
  REQUIRE(found);
  REQUIRE(found->rise_time);
  CHECK(found->rise_time->value() == Approx(0.32).epsilon(5e-3));
  CHECK(found->monotonic);
}

TEST_CASE("start-up: hostile records are refused, and nothing is NaN") {
  const double nan = std::numeric_limits<double>::quiet_NaN();
  CHECK_FALSE(efficiency::start_up({}, settings()));
  CHECK_FALSE(efficiency::half_cycle_rms({}, 1e-4, 50));
  const std::vector<double> flat(100, 1.0);
  CHECK_FALSE(efficiency::half_cycle_rms(flat, 1e-4, nan));
  CHECK_FALSE(efficiency::half_cycle_rms(flat, 0, 50));
  CHECK_FALSE(efficiency::half_cycle_rms(flat, 1e-2, 50));
  const std::vector<double> huge(1000, 1e200);
  CHECK_FALSE(efficiency::half_cycle_rms(huge, 1e-4, 50));
  RandomSource random{loadstair::tests::seed_of_tests()};
  for (int trial = 0; trial < 2000; ++trial) {
    efficiency::Envelope wild;
    wild.interval_s = 1e-3;
    const std::size_t many = random.below(60);
    for (std::size_t i = 0; i < many; ++i) {
      const double kind = random.uniform();
      wild.values.push_back(i < many / 3 || kind < 0.1 ? 0.0
                            : kind > 0.999             ? nan
                                                       : 1 + (kind > 0.9 ? 1e3 : 0.001) * kind);
    }
    const auto found = efficiency::start_up(wild, settings());
    if (!found) continue;
    for (const auto* quoted : {&found->rise_time, &found->overshoot, &found->settling_time, &found->delay}) {
      if (!*quoted) continue;
      CHECK(std::isfinite((*quoted)->value()));
      CHECK(std::isfinite((*quoted)->variance()));
    }
    CHECK(std::isfinite(found->deepest_fall));
  }
}
