// Lines, autocorrelations, runs and Student's t against R: stats::lm, stats::acf, choose(), stats::qt.
#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <string>
#include <vector>

#include "analysis/estimate/coverage.h"
#include "analysis/series/correlation.h"
#include "analysis/series/line.h"
#include "analysis/series/statistics.h"
#include "analysis/settling/runs.h"
#include "analysis/settling/thermal_end.h"
#include "tests/analysis/random_source.h"
#include "tests/analysis/rscript.h"

namespace loadstair {
namespace {

/// First-order noise of correlation r.
std::vector<double> wandering(tests::RandomSource& random, std::size_t count, double r) {
  std::vector<double> out;
  double value = random.normal();
  for (std::size_t i = 0; i < count; ++i) {
    value = r * value + std::sqrt(1.0 - r * r) * random.normal();
    out.push_back(value);
  }
  return out;
}

TEST_CASE("Student's t over fractional degrees of freedom is R's qt") {
  std::vector<double> freedom;
  for (double nu = 1.0; nu < 3000.0; nu *= 1.07) freedom.push_back(nu);
  for (const double p : {0.6827, 0.9, 0.95, 0.9545, 0.99}) {
    const auto reference =
        tests::rscript("out(qt((1 + x[[2]]) / 2, x[[1]]))\n", {freedom, std::vector<double>{p}});
    REQUIRE(reference.size() == freedom.size());
    for (std::size_t i = 0; i < freedom.size(); ++i) {
      INFO("p " << p << ", nu " << freedom[i]);
      CHECK(estimate::student_t(p, freedom[i]) == Approx(reference[i]).epsilon(1e-9));
    }
  }
}

TEST_CASE("a line and its slope's uncertainty are those of lm") {
  tests::RandomSource random{tests::seed_of_tests() + 400};
  std::vector<std::vector<double>> arrays;
  for (int i = 0; i < 30; ++i) {
    std::vector<double> time_s, value;
    double t = random.uniform(0.0, 1e4);
    const std::size_t count = 3 + random.below(200);
    for (std::size_t k = 0; k < count; ++k) {
      time_s.push_back(t);
      value.push_back(random.uniform(-1.0, 1.0) + 0.003 * t);
      t += random.uniform(0.1, 2.0);
    }
    arrays.push_back(time_s);
    arrays.push_back(value);
  }
  const auto reference = tests::rscript(
      "for (i in seq(1, length(x), 2)) {\n"
      "  t <- x[[i]] - (min(x[[i]]) + max(x[[i]])) / 2\n"
      "  s <- summary(lm(x[[i + 1]] ~ t))\n"
      "  out(c(s$coefficients[1, 1], s$coefficients[2, 1], s$coefficients[2, 2], s$sigma))\n"
      "}\n",
      arrays);
  REQUIRE(reference.size() == 4 * 30);
  for (std::size_t i = 0; i < 30; ++i) {
    const double* r = &reference[4 * i];
    const auto line = series::fit_line({arrays[2 * i], arrays[2 * i + 1]});
    INFO("LOADSTAIR_SEED=" << tests::seed_of_tests() << ", line " << i);
    REQUIRE(line);
    CHECK(line->at_middle == Approx(r[0]).epsilon(1e-10));
    CHECK(std::abs(line->slope_per_s - r[1]) <= 1e-9 * r[2]);
    CHECK(line->slope_u_per_s == Approx(r[2]).epsilon(1e-9));
    CHECK(line->residual_deviation == Approx(r[3]).epsilon(1e-9));
  }
}

TEST_CASE("lag 1 and the integrated correlation are those of R's acf") {
  tests::RandomSource random{tests::seed_of_tests() + 500};
  std::vector<std::vector<double>> arrays;
  for (int i = 0; i < 40; ++i)
    arrays.push_back(wandering(random, 20 + random.below(400), random.uniform(-0.5, 0.95)));
  // Geyer (1992): sums of pairs of neighbouring lags while positive, made non-increasing. acf's divisor is N
  // at every lag, as ours.
  const auto reference = tests::rscript(
      "for (v in x) {\n"
      "  n <- length(v)\n"
      "  rho <- as.vector(acf(v, lag.max = n - 1, plot = FALSE, demean = TRUE)$acf)\n"
      "  raw <- as.vector(acf(v, lag.max = n - 1, plot = FALSE, demean = FALSE)$acf)\n"
      "  pairs <- raw[seq(1, n - 1, 2)] + raw[seq(2, n, 2)]\n"
      "  bad <- which(pairs <= 0)\n"
      "  if (length(bad) > 0) pairs <- pairs[seq_len(bad[1] - 1)]\n"
      "  g <- if (length(pairs) > 0) 2 * sum(cummin(pairs)) - 1 else 1\n"
      "  out(c(rho[2], max(1, g), n / max(1, g)))\n"
      "}\n",
      arrays);
  REQUIRE(reference.size() == 3 * arrays.size());
  for (std::size_t i = 0; i < arrays.size(); ++i) {
    const double* r = &reference[3 * i];
    INFO("LOADSTAIR_SEED=" << tests::seed_of_tests() << ", series " << i);
    CHECK(series::statistics(arrays[i])->lag1_autocorrelation == Approx(r[0]).epsilon(1e-10).margin(1e-13));
    const auto found = series::integrated_correlation(arrays[i]);
    CHECK(found.inefficiency == Approx(r[1]).epsilon(1e-9));
    CHECK(found.effective_count == Approx(std::max(1.0, r[2])).epsilon(1e-9));
  }
}

TEST_CASE("the runs test decides as the exact distribution of runs does") {
  tests::RandomSource random{tests::seed_of_tests() + 600};
  std::vector<std::vector<double>> arrays;
  std::vector<bool> found;
  for (int i = 0; i < 300; ++i) {
    // 40 values: the test's blocks are then single values.
    arrays.push_back(wandering(random, 40, random.uniform(-0.3, 0.95)));
    found.push_back(settling::random_signs(arrays.back()));
  }
  // P(runs <= r) given n1 and n2 signs, by counting arrangements (Wald and Wolfowitz 1940, eq. for odd and
  // even numbers of runs).
  const auto p = tests::rscript(
      "for (v in x) {\n"
      "  s <- v > 0; n1 <- sum(s); n2 <- sum(!s); r <- 1 + sum(s[-1] != s[-length(s)])\n"
      "  if (n1 == 0 || n2 == 0) { out(c(0, 0)); next }\n"
      "  total <- 0\n"
      "  for (k in 2:r) {\n"
      "    h <- k %/% 2\n"
      "    total <- total + if (k %% 2 == 0) 2 * choose(n1 - 1, h - 1) * choose(n2 - 1, h - 1)\n"
      "      else choose(n1 - 1, h) * choose(n2 - 1, h - 1) + choose(n1 - 1, h - 1) * choose(n2 - 1, h)\n"
      "  }\n"
      "  out(c(total / choose(n1 + n2, n1), min(n1, n2)))\n"
      "}\n",
      arrays);
  REQUIRE(p.size() == 2 * arrays.size());
  int random_ones = 0;
  int in_runs = 0;
  for (std::size_t i = 0; i < arrays.size(); ++i) {
    const double exact = p[2 * i];
    INFO("LOADSTAIR_SEED=" << tests::seed_of_tests() << ", series " << i << ", exact p " << exact);
    // One-sided at 2.5 %; the normal approximation moves the border a little, and is stricter where one sign
    // is rare.
    if (exact >= 0.045 && p[2 * i + 1] >= 8) {
      CHECK(found[i]);
      ++random_ones;
    } else if (exact <= 0.012) {
      CHECK_FALSE(found[i]);
      ++in_runs;
    }
  }
  CHECK(random_ones >= 30);
  CHECK(in_runs >= 30);
}

TEST_CASE("the slope of loss against temperature is lm's, its uncertainty by the residuals' correlation") {
  tests::RandomSource random{tests::seed_of_tests() + 700};
  std::vector<std::vector<double>> arrays;
  for (int i = 0; i < 20; ++i) {
    std::vector<double> temperature_c, loss_w = wandering(random, 120, random.uniform(0.0, 0.8));
    for (std::size_t k = 0; k < loss_w.size(); ++k) {
      temperature_c.push_back(60.0 - 35.0 * std::exp(-static_cast<double>(k) / 50.0));
      loss_w[k] = 0.2 * loss_w[k] + 40.0 + 0.05 * temperature_c[k];
    }
    arrays.push_back(temperature_c);
    arrays.push_back(loss_w);
  }
  const auto reference = tests::rscript(
      "for (i in seq(1, length(x), 2)) {\n"
      "  s <- summary(lm(x[[i + 1]] ~ x[[i]]))\n"
      "  out(s$coefficients[2, 1:2]); out(residuals(s))\n"
      "}\n",
      arrays);
  REQUIRE(reference.size() == 20 * 122);
  for (std::size_t i = 0; i < 20; ++i) {
    const double* r = &reference[122 * i];
    const auto line = settling::loss_with_temperature(arrays[2 * i], arrays[2 * i + 1]);
    REQUIRE(line);
    const auto g = series::integrated_correlation({r + 2, 120}).inefficiency;
    CHECK(line->slope_w_per_k == Approx(r[0]).epsilon(1e-9));
    CHECK(line->slope_u_w_per_k == Approx(r[1] * std::sqrt(g)).epsilon(1e-8));
  }
}

}  // namespace
}  // namespace loadstair
