#include "analysis/estimate/monte_carlo.h"

#include <algorithm>
#include <array>
#include <catch2/catch.hpp>
#include <cmath>
#include <numeric>
#include <span>
#include <vector>

#include "analysis/estimate/distribution_function.h"
#include "analysis/estimate/generator.h"

using namespace loadstair;
using estimate::Estimate;
using estimate::Generator;

namespace {

double first(std::span<const double> x) {
  return x[0];
}

Estimate one(const char* key, double value, estimate::Distribution distribution, double u) {
  return {value, estimate::make_type_b(key, key, distribution), u};
}

estimate::MonteCarlo found(const estimate::Model& model, std::vector<Estimate> inputs,
                           estimate::MonteCarloSettings settings = {}) {
  auto out = estimate::propagate(model, inputs, settings);
  REQUIRE(out);
  return *std::move(out);
}

/// xoshiro256++ as published, one stream at a time.
std::uint64_t published_step(std::array<std::uint64_t, 4>& s) {
  const auto rotated = [](std::uint64_t x, unsigned k) { return (x << k) | (x >> (64 - k)); };
  const std::uint64_t result = rotated(s[0] + s[3], 23) + s[0];
  const std::uint64_t t = s[1] << 17U;
  s[2] ^= s[0];
  s[3] ^= s[1];
  s[1] ^= s[2];
  s[0] ^= s[3];
  s[2] ^= t;
  s[3] = rotated(s[3], 45);
  return result;
}

}  // namespace

TEST_CASE("the generator is xoshiro256++ in four lanes, seeded by splitmix64") {
  // The first numbers of splitmix64 from seed 1234567, as widely reproduced (Rosetta Code).
  CHECK(estimate::mixed(1234567) == 6457827717110365317U);
  CHECK(estimate::mixed(1234567 + 0x9E3779B97F4A7C15U) == 3203168211198807973U);
  std::uint64_t counter = 42;
  std::array<std::array<std::uint64_t, 4>, Generator::kLanes> lanes{};
  for (auto& lane : lanes) {
    for (auto& word : lane) {
      word = estimate::mixed(counter);
      counter += 0x9E3779B97F4A7C15U;
    }
  }
  Generator generator{42};
  for (int i = 0; i < 100; ++i) {
    const auto numbers = generator.next();
    for (std::size_t k = 0; k < numbers.size(); ++k) CHECK(numbers[k] == published_step(lanes[k]));
  }
  // xoshiro256++ from the state 1, 2, 3, 4: first outputs by its definition: rotl(1 + 4, 23) + 1.
  std::array<std::uint64_t, 4> state{1, 2, 3, 4};
  CHECK(published_step(state) == 41943041U);
  CHECK(published_step(state) == 58720359U);
}

TEST_CASE("normal draws follow the normal distribution function into the tail") {
  // Ten million draws: the share within each limit is binomial; five deviations.
  Generator generator{7};
  constexpr std::size_t kDraws = 10'000'000;
  std::vector<double> x(kDraws);
  generator.normal(x);
  for (const double limit : {-4.5, -3.5, -3.2, -2.0, -1.0, -0.3, 0.0, 0.1, 0.7, 1.5, 2.5, 3.4, 3.6, 4.2}) {
    const double p = 0.5 * std::erfc(-limit / std::sqrt(2.0));
    const auto below = std::count_if(x.begin(), x.end(), [&](double one) { return one < limit; });
    INFO(limit);
    CHECK(std::abs(static_cast<double>(below) - p * kDraws) < 5 * std::sqrt(p * (1 - p) * kDraws));
  }
  // Neighbours are not correlated, nor are draws a group of lanes apart.
  for (const std::size_t lag : {1U, 4U, 256U}) {
    double sum = 0;
    for (std::size_t i = 0; i + lag < kDraws; ++i) sum += x[i] * x[i + lag];
    CHECK(std::abs(sum) < 5 * std::sqrt(static_cast<double>(kDraws)));
  }
}

TEST_CASE("chi-squared draws have the mean, the variance and the quantiles of their degrees of freedom") {
  // Over nu: mean 1, variance 2/nu; 5 % points of chi-squared by any table: 3.841, 0.1026 (nu = 1, 2 at 95 %
  // and 5 %), 18.307 (nu = 10 at 95 %). A million draws, five deviations.
  struct Point {
    double nu;
    double p;
    double at;
  };
  for (const Point& point :
       {Point{1, 0.95, 3.841459}, Point{2, 0.05, 0.1025866}, Point{10, 0.95, 18.30704}}) {
    Generator generator{11};
    std::vector<double> x(1'000'000);
    generator.chi_squared_per_freedom(point.nu, x);
    const auto count = static_cast<double>(x.size());
    const double mean = std::accumulate(x.begin(), x.end(), 0.0) / count;
    CHECK(std::abs(mean - 1) < 5 * std::sqrt(2 / point.nu / count));
    const auto below =
        std::count_if(x.begin(), x.end(), [&](double one) { return one * point.nu < point.at; });
    CHECK(std::abs(static_cast<double>(below) - point.p * count) <
          5 * std::sqrt(point.p * (1 - point.p) * count));
  }
}

TEST_CASE("every distribution is drawn with mean 0, deviation 1 and its own quantiles") {
  // At a million draws a quantile with density f is known to sqrt(p (1 - p)/10^6)/f; five of them (false
  // alarm below 1e-6 each).
  const auto shape = [](estimate::Distribution distribution) {
    estimate::MonteCarloSettings settings;
    settings.keep_draws = true;
    return found(first, {one("x", 0, distribution, 1)}, settings);
  };
  const double root = std::sqrt(1e-6);
  SECTION("rectangular") {
    const auto x = shape(estimate::Distribution::rectangular);
    CHECK(std::abs(x.mean) < 5 * root);
    CHECK(x.standard_deviation == Approx(1).margin(5 * root));
    CHECK(x.sorted.back() <= std::sqrt(3.0));
    CHECK(x.symmetric.high == Approx(0.95 * std::sqrt(3.0)).margin(5 * 0.16 * root * 3.47));
    CHECK(std::is_sorted(x.sorted.begin(), x.sorted.end()));
    CHECK(x.sorted.size() == 1'000'000);
  }
  SECTION("triangular: 1 - (1 - |x|/a)^2 within a = sqrt 6") {
    const auto x = shape(estimate::Distribution::triangular);
    CHECK(x.standard_deviation == Approx(1).margin(5 * root));
    CHECK(x.sorted.back() <= std::sqrt(6.0));
    CHECK(x.symmetric.high == Approx(std::sqrt(6.0) * (1 - std::sqrt(0.05))).margin(0.009));
  }
  SECTION("arcsine: sqrt 2 sin(pi (p - 1/2))") {
    const auto x = shape(estimate::Distribution::arcsine);
    CHECK(x.standard_deviation == Approx(1).margin(5 * root));
    CHECK(x.symmetric.high == Approx(std::sqrt(2.0) * std::sin(3.14159265358979 * 0.475)).margin(0.001));
  }
  SECTION("normal") {
    const auto x = shape(estimate::Distribution::normal);
    CHECK(x.standard_deviation == Approx(1).margin(5 * root));
    CHECK(x.symmetric.high == Approx(1.959964).margin(5 * 0.156 * root / 0.0584));
  }
}

TEST_CASE("a Type A source is drawn as Student's t with its contribution as scale (JCGM 101 6.4.9)") {
  const Estimate a{10, estimate::make_type_a("noise", "noise", 5), 2};
  const auto x = found(first, {a});
  // Variance nu/(nu - 2); t_0.975(5) = 2.570582 (JCGM 100 table G.2: 2.57).
  CHECK(x.mean == Approx(10).margin(0.013));
  CHECK(x.standard_deviation == Approx(2 * std::sqrt(5.0 / 3)).epsilon(0.01));
  CHECK(x.symmetric.high - 10 == Approx(2 * 2.570582).epsilon(0.01));
  // The same shape from one and a half degrees of freedom; its 95 % point by R: qt(0.975, 1.5) = 6.3109.
  const auto heavy = found(first, {{0, estimate::make_type_a("noise", "noise", 1.5), 1}});
  CHECK(heavy.symmetric.high == Approx(estimate::student_t(0.95, 1.5)).epsilon(0.03));
}

TEST_CASE("sources of one sample share one chi: their plain sum is still Student's t") {
  // Two independent t of 4 degrees of freedom would have a thinner tail than t(4) scaled by sqrt 2.
  const auto input = [](const char* key, const char* sample) {
    estimate::Source source;
    source.key = key;
    source.kind = estimate::Kind::type_a;
    source.degrees_of_freedom = 4;
    source.sample = sample;
    return Estimate{0, estimate::make_source(source), 1};
  };
  const estimate::Model sum = [](std::span<const double> x) { return x[0] + x[1]; };
  estimate::MonteCarloSettings far_out;
  far_out.level = 0.999;
  const auto joint = found(sum, {input("a", "s"), input("b", "s")}, far_out);
  const auto apart = found(sum, {input("a", ""), input("b", "")}, far_out);
  const double t4 = std::sqrt(2.0) * estimate::student_t(0.999, 4);
  CHECK(joint.symmetric.high == Approx(t4).epsilon(0.05));
  CHECK(apart.symmetric.high < 0.92 * t4);
}

TEST_CASE("inputs that share a source move together, whatever their order; the seed makes the numbers") {
  const auto common = estimate::make_type_b("gain", "gain", estimate::Distribution::rectangular);
  const Estimate in = Estimate{100, common, 1} + one("in", 0, estimate::Distribution::normal, 0.1);
  const Estimate out = Estimate{90, common, 0.9} + one("out", 0, estimate::Distribution::normal, 0.1);
  const auto forward = found([](std::span<const double> x) { return x[1] / x[0]; }, {in, out});
  const auto backward = found([](std::span<const double> x) { return x[0] / x[1]; }, {out, in});
  CHECK(forward.mean == backward.mean);
  CHECK(forward.shortest.low == backward.shortest.low);
  // The gain drops out: what is left is the noise (linear: sqrt(0.1^2 + 0.09^2)/100).
  CHECK(forward.standard_deviation == Approx(std::hypot(0.1, 0.09) / 100).epsilon(0.005));
  estimate::MonteCarloSettings other;
  other.seed = 7;
  CHECK(found([](std::span<const double> x) { return x[1] / x[0]; }, {in, out}, other).mean != forward.mean);
  CHECK(forward.seed == estimate::kMonteCarloSeed);
  // A block model gives the same bits as a call per draw.
  const auto blocks = estimate::propagate_blocks(
      [](std::span<const std::span<const double>> x, std::span<double> result) {
        for (std::size_t j = 0; j < result.size(); ++j) result[j] = x[1][j] / x[0][j];
      },
      std::array{in, out});
  REQUIRE(blocks);
  CHECK(blocks->mean == forward.mean);
  CHECK(blocks->symmetric.high == forward.symmetric.high);
}

TEST_CASE("the shortest interval of a one-sided distribution begins at its edge") {
  // x^2 of a standard normal: chi-squared of one degree, 95 % at 3.841459 (any table).
  const auto x = found([](std::span<const double> v) { return v[0] * v[0]; },
                       {one("x", 0, estimate::Distribution::normal, 1)});
  CHECK(x.shortest.low == Approx(0).margin(1e-6));
  CHECK(x.shortest.high == Approx(3.841459).epsilon(0.01));
  CHECK(x.symmetric.low == Approx(0.000982).epsilon(0.05));
  CHECK(x.symmetric.high == Approx(5.023886).epsilon(0.01));
}

TEST_CASE("the numerical tolerance is half the last significant digit (JCGM 101 7.9.2, its examples)") {
  // 0.35 g: 35 x 10^-2 and 4 x 10^-1; 2 x 10^0.
  CHECK(estimate::numerical_tolerance(0.35, 2) == Approx(0.005).epsilon(1e-14));
  CHECK(estimate::numerical_tolerance(0.35, 1) == Approx(0.05).epsilon(1e-14));
  CHECK(estimate::numerical_tolerance(2, 1) == 0.5);
  CHECK(estimate::numerical_tolerance(0.0996, 2) == Approx(0.005).epsilon(1e-14));
  CHECK(estimate::numerical_tolerance(502, 1) == Approx(50).epsilon(1e-14));
  CHECK(estimate::numerical_tolerance(0) == 0);
}

TEST_CASE("the adaptive procedure stops when it is stable, and says when it is not") {
  const auto normal = one("x", 5, estimate::Distribution::normal, 0.9);
  const auto done = estimate::propagate_adaptively(first, std::array{normal});
  REQUIRE(done);
  CHECK(done->stabilised);
  CHECK(done->tolerance == Approx(0.01));
  CHECK(done->draws % 10'000 == 0);
  CHECK(done->symmetric.high == Approx(5 + 0.9 * 1.959964).margin(0.02));
  estimate::AdaptiveSettings short_of_draws;
  short_of_draws.most_draws = 30'000;
  short_of_draws.significant_digits = 2;
  const auto ended = estimate::propagate_adaptively(first, std::array{normal}, short_of_draws);
  REQUIRE(ended);
  CHECK_FALSE(ended->stabilised);
  CHECK(ended->draws == 30'000);
  // It validates nothing, even where the ends happen to agree.
  CHECK_FALSE(estimate::validate(estimate::coverage(normal), *ended).agrees);
}

TEST_CASE("where the linear interval fails, the shortest Monte Carlo interval is reported, without k and U") {
  const auto x = one("x", 0, estimate::Distribution::rectangular, 1);
  const auto linear = estimate::coverage(x);
  const auto mc =
      estimate::propagate_adaptively(first, std::array{one("y", 0, estimate::Distribution::normal, 1)});
  REQUIRE(mc);
  const auto fine = estimate::validate(linear, *mc);
  CHECK(fine.agrees);
  CHECK(estimate::reported(linear, *mc, fine).method == estimate::CoverageMethod::linear);
  auto off = *mc;
  off.shortest.high += 0.7;  // u = 1: delta = 0.5
  const auto failed = estimate::validate(linear, off);
  CHECK_FALSE(failed.agrees);
  CHECK(failed.tolerance == 0.5);
  CHECK(failed.high_difference == Approx(0.7).margin(0.1));
  const auto instead = estimate::reported(linear, off, failed);
  CHECK(instead.method == estimate::CoverageMethod::monte_carlo);
  CHECK(instead.k == 0);
  CHECK(instead.expanded == 0);
  CHECK(instead.high == off.shortest.high);
  CHECK(instead.standard_uncertainty == off.standard_deviation);
}

TEST_CASE("a model that leaves its range is refused, not averaged") {
  const auto x = one("x", 0.5, estimate::Distribution::normal, 1);
  const auto root =
      estimate::propagate([](std::span<const double> v) { return std::sqrt(v[0]); }, std::array{x});
  REQUIRE_FALSE(root);
  CHECK(root.refusal().reason.find("no finite value") != std::string::npos);
  CHECK_FALSE(estimate::propagate_adaptively([](std::span<const double> v) { return std::sqrt(v[0]); },
                                             std::array{x}));
  estimate::MonteCarloSettings settings;
  settings.level = 1;
  CHECK_FALSE(estimate::propagate(first, std::array{x}, settings));
  settings = {};
  settings.draws = 10;
  CHECK_FALSE(estimate::propagate(first, std::array{x}, settings));
  CHECK_FALSE(estimate::propagate(first, std::array{Estimate{0, estimate::make_type_a("n", "n", 0), 1}}));
}
