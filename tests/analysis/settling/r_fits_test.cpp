// Exponential fits against R's nls on noisy series. Source: R, stats::nls (Gauss-Newton on analytic
// gradients). The reference set Thurber is a quotient of cubic polynomials, no sum of exponentials: not
// within these fits.
#include <catch2/catch.hpp>
#include <cmath>
#include <string>
#include <vector>

#include "analysis/settling/settling.h"
#include "tests/analysis/random_source.h"
#include "tests/analysis/rscript.h"

namespace loadstair::settling {
namespace {

struct Series {
  std::vector<double> time_s, value;
  std::vector<double> truth;  ///< end, then amplitude and constant of each term
};

Series draw(tests::RandomSource& random, int terms) {
  Series out;
  const double window_s = std::pow(10.0, random.uniform(2.0, 4.0));
  out.truth.push_back(random.uniform(30.0, 80.0));
  if (terms == 1) {
    out.truth.push_back(random.uniform(10.0, 50.0));
    out.truth.push_back(window_s * random.uniform(0.1, 0.9));
  } else {
    out.truth.insert(out.truth.end(), {random.uniform(8.0, 25.0), window_s * random.uniform(0.03, 0.06),
                                       random.uniform(15.0, 40.0), window_s * random.uniform(0.25, 0.4)});
  }
  const double noise = terms == 1 ? std::pow(10.0, random.uniform(-2.0, -0.3)) : random.uniform(0.01, 0.05);
  // At most 256 readings: those are fitted as they are.
  const std::size_t count = terms == 1 ? 30 + random.below(220) : 200 + random.below(57);
  double t = 0.0;
  for (std::size_t i = 0; i < count; ++i) {
    double value = out.truth[0];
    for (std::size_t k = 1; k + 1 < out.truth.size(); k += 2)
      value -= out.truth[k] * std::exp(-t / out.truth[k + 1]);
    out.time_s.push_back(t);
    out.value.push_back(value + noise * random.normal());
    t += window_s / static_cast<double>(count) * random.uniform(0.5, 1.5);
  }
  return out;
}

/// For each series: the estimates, then their standard errors, then the residual sum of squares.
std::vector<double> nls(const std::vector<Series>& all, int terms) {
  std::vector<std::vector<double>> arrays;
  for (const Series& one : all) {
    arrays.push_back(one.time_s);
    arrays.push_back(one.value);
    arrays.push_back(one.truth);
  }
  const std::string model = terms == 1
                                ? "f <- deriv(~ e - a*exp(-t/u), c('e','a','u'), function(e, a, u, t) NULL)\n"
                                  "names <- c('e','a','u')\nform <- y ~ f(e, a, u, t)\n"
                                : "f <- deriv(~ e - a*exp(-t/u) - b*exp(-t/v), c('e','a','u','b','v'),\n"
                                  "  function(e, a, u, b, v, t) NULL)\n"
                                  "names <- c('e','a','u','b','v')\nform <- y ~ f(e, a, u, b, v, t)\n";
  return tests::rscript(
      model +
          "for (i in seq(1, length(x), 3)) {\n"
          "  t <- x[[i]]; y <- x[[i + 1]]\n"
          "  m <- nls(form, start = setNames(as.list(x[[i + 2]]), names),\n"
          "           control = nls.control(tol = 1e-6, maxiter = 500, minFactor = 1e-10))\n"
          "  s <- summary(m)$coefficients\n"
          "  out(s[, 1]); out(s[, 2]); out(sum(residuals(m)^2))\n"
          "}\n",
      arrays);
}

TEST_CASE("one exponential on noisy series: parameters and standard errors are those of nls") {
  tests::RandomSource random{tests::seed_of_tests() + 100};
  std::vector<Series> all;
  for (int i = 0; i < 60; ++i) all.push_back(draw(random, 1));
  const auto reference = nls(all, 1);
  REQUIRE(reference.size() == 7 * all.size());
  for (std::size_t i = 0; i < all.size(); ++i) {
    const double* r = &reference[7 * i];
    const auto fit = fit_exponential({all[i].time_s, all[i].value});
    INFO("LOADSTAIR_SEED=" << tests::seed_of_tests() << ", series " << i);
    REQUIRE(fit);
    // nls stops where its offset, a step over a standard error and sqrt(N - p), is 1e-6: 1.6e-5 of a standard
    // error at most.
    CHECK(std::abs(fit->end - r[0]) <= 1.6e-5 * r[3]);
    CHECK(std::abs(fit->amplitude[0] - r[1]) <= 1.6e-5 * r[4]);
    CHECK(std::abs(fit->tau_s[0] - r[2]) <= 1.6e-5 * r[5]);
    CHECK(fit->end_standard_error == Approx(r[3]).epsilon(1e-5));
    CHECK(fit->amplitude_standard_error[0] == Approx(r[4]).epsilon(1e-5));
    CHECK(fit->tau_standard_error_s[0] == Approx(r[5]).epsilon(1e-5));
    CHECK(fit->residual_sum_of_squares == Approx(r[6]).epsilon(1e-9));
  }
}

TEST_CASE("two exponentials on noisy series: parameters and standard errors are those of nls") {
  tests::RandomSource random{tests::seed_of_tests() + 200};
  std::vector<Series> all;
  for (int i = 0; i < 40; ++i) all.push_back(draw(random, 2));
  const auto reference = nls(all, 2);
  REQUIRE(reference.size() == 11 * all.size());
  int resolved = 0;
  for (std::size_t i = 0; i < all.size(); ++i) {
    const double* r = &reference[11 * i];
    const auto fit = fit_two_exponentials({all[i].time_s, all[i].value});
    if (!fit) continue;
    ++resolved;
    INFO("LOADSTAIR_SEED=" << tests::seed_of_tests() << ", series " << i);
    CHECK(std::abs(fit->end - r[0]) <= 1.6e-5 * r[5]);
    CHECK(fit->end_standard_error == Approx(r[5]).epsilon(1e-5));
    for (std::size_t k = 0; k < 2; ++k) {
      CHECK(std::abs(fit->amplitude[k] - r[1 + 2 * k]) <= 1.6e-5 * r[6 + 2 * k]);
      CHECK(std::abs(fit->tau_s[k] - r[2 + 2 * k]) <= 1.6e-5 * r[7 + 2 * k]);
      CHECK(fit->amplitude_standard_error[k] == Approx(r[6 + 2 * k]).epsilon(1e-5));
      CHECK(fit->tau_standard_error_s[k] == Approx(r[7 + 2 * k]).epsilon(1e-5));
    }
    CHECK(fit->residual_sum_of_squares == Approx(r[10]).epsilon(1e-8));
  }
  CHECK(resolved >= 35);
}

TEST_CASE("many readings, fitted as means of neighbours, end where nls on all of them does") {
  tests::RandomSource random{tests::seed_of_tests() + 300};
  std::vector<Series> all;
  for (int i = 0; i < 10; ++i) {
    Series one;
    one.truth = {random.uniform(30.0, 80.0), random.uniform(10.0, 50.0), random.uniform(300.0, 1500.0)};
    for (int k = 0; k < 3000; ++k) {
      one.time_s.push_back(k);
      one.value.push_back(one.truth[0] - one.truth[1] * std::exp(-k / one.truth[2]) + 0.1 * random.normal());
    }
    all.push_back(std::move(one));
  }
  const auto reference = nls(all, 1);
  for (std::size_t i = 0; i < all.size(); ++i) {
    const double* r = &reference[7 * i];
    const auto fit = fit_exponential({all[i].time_s, all[i].value});
    INFO("LOADSTAIR_SEED=" << tests::seed_of_tests() << ", series " << i);
    REQUIRE(fit);
    // The means lose what a point's inside tells: a few hundredths of the information, and the square root of
    // that in standard errors. Their scatter has 125 degrees of freedom: 6 %, four of which are allowed.
    CHECK(std::abs(fit->end - r[0]) <= 0.2 * r[3]);
    CHECK(std::abs(fit->tau_s[0] - r[2]) <= 0.2 * r[5]);
    CHECK(fit->end_standard_error == Approx(r[3]).epsilon(0.25));
    CHECK(fit->tau_standard_error_s[0] == Approx(r[5]).epsilon(0.25));
  }
}

}  // namespace
}  // namespace loadstair::settling
