// JCGM 106:2012: probabilities of conformity, guard bands and what they risk.
#include <catch2/catch.hpp>
#include <cmath>
#include <fstream>
#include <limits>
#include <nlohmann/json.hpp>
#include <optional>
#include <string>
#include <vector>

#include "analysis/limits/limits.h"

using namespace loadstair;
using limits::Tolerance;
using limits::Verdict;

namespace {

const nlohmann::json& part(const char* name) {
  static const nlohmann::json all = [] {
    std::ifstream file{std::string{LOADSTAIR_SOURCE} + "/tests/published/jcgm106/conformity.json"};
    REQUIRE(file);
    return nlohmann::json::parse(file);
  }();
  return all.at(name);
}

/// A normal result with U = 2 u.
estimate::Coverage result(double y, double u) {
  estimate::Coverage out;
  out.value = y;
  out.standard_uncertainty = u;
  out.k = 2;
  out.expanded = 2 * u;
  out.low = y - 2 * u;
  out.high = y + 2 * u;
  out.degrees_of_freedom = std::numeric_limits<double>::infinity();
  return out;
}

std::optional<double> optional_of(const nlohmann::json& from, const char* name) {
  if (!from.contains(name)) return std::nullopt;
  return from.at(name).get<double>();
}

double figure(const nlohmann::json& from, const char* name) {
  return from.at(name).get<double>();
}

Verdict verdict(double y, double u, const Tolerance& tolerance, double r) {
  const auto found = limits::decide(result(y, u), tolerance, "", {r});
  REQUIRE(found);
  return found->verdict;
}

double phi(double x) {
  return 0.5 * std::erfc(-x / std::sqrt(2.0));
}

}  // namespace

TEST_CASE("JCGM 106 clause 7: probability of conformity with one and with two limits") {
  for (const auto& one : part("examples")) {
    INFO(one.at("id").get<std::string>());
    const Tolerance tolerance{optional_of(one, "lower"), optional_of(one, "upper")};
    const auto found = limits::decide(result(figure(one, "y"), figure(one, "u")), tolerance, "");
    REQUIRE(found);
    CHECK(found->conforming_probability == Approx(figure(one, "p_conform")).margin(5.1e-8));
    CHECK(found->conforming_probability == Approx(figure(one, "remembered_two_digit_result")).margin(0.0051));
  }
}

TEST_CASE("ILAC-G8: the greatest risk at the acceptance limit of each guard band") {
  for (const auto& one : part("guard_bands")) {
    INFO(one.at("rule").get<std::string>());
    const double r = figure(one, "w_over_U");
    const double u = 0.3;
    const Tolerance tolerance{std::nullopt, 10.0};
    // On the acceptance limit the result passes, a hair beyond it does not.
    const double edge = 10 - r * 2 * u;
    const auto found = limits::decide(result(edge, u), tolerance, "", {r});
    REQUIRE(found);
    CHECK(1 - found->conforming_probability ==
          Approx(figure(one, "max_specific_risk_at_acceptance_limit")).epsilon(1e-5));
    CHECK(*found->acceptance.high == Approx(edge).epsilon(1e-15));
    CHECK(verdict(edge - 1e-9, u, tolerance, r) == Verdict::pass);
    CHECK(verdict(edge + 1e-9, u, tolerance, r) == (r > 0 ? Verdict::undecided : Verdict::fail));
  }
}

TEST_CASE("JCGM 106: two-sided unit tolerances") {
  for (const auto& one : part("two_sided")) {
    const double u = figure(one, "u");
    INFO("u = " << u);
    const Tolerance tolerance{-1.0, 1.0};
    const auto middle = limits::decide(result(0, u), tolerance, "");
    REQUIRE(middle);
    CHECK(*middle->acceptance.low == Approx(one.at("acceptance").at(0).get<double>()).margin(1e-12));
    CHECK(*middle->acceptance.high == Approx(one.at("acceptance").at(1).get<double>()).margin(1e-12));
    CHECK(middle->conforming_probability == Approx(figure(one, "p_conform_at_zero")).margin(5.1e-8));
    CHECK(middle->verdict == Verdict::pass);
    const double edge = *middle->acceptance.high;
    CHECK(limits::conforming_probability(result(edge, u), tolerance) ==
          Approx(figure(one, "p_conform_at_limit")).margin(5.1e-8));
    CHECK(limits::conforming_probability(result(1, u), tolerance) ==
          Approx(figure(one, "p_conform_at_tolerance")).margin(5.1e-8));
  }
}

TEST_CASE("guarded rejection: a result fails only where it is surely beyond the limit") {
  // 0.1 % risk of a wrong fail: w = z(0.999) u = r 2 u, relative u = 2 % of the speed: 106.59 km/h.
  const double z = 3.090232306167813;  // any table of the normal distribution
  const double threshold = figure(part("guarded_rejection"), "threshold_exact");
  CHECK(100 / (1 - 0.02 * z) == Approx(threshold).margin(5.1e-5));
  const Tolerance tolerance{std::nullopt, 100.0};
  CHECK(verdict(threshold + 0.001, 0.02 * (threshold + 0.001), tolerance, z / 2) == Verdict::fail);
  CHECK(verdict(threshold - 0.001, 0.02 * (threshold - 0.001), tolerance, z / 2) == Verdict::undecided);
}

TEST_CASE("JCGM 106 clause 9: global risks of the decisions over all items and measurements") {
  // Not a function of the program: its decisions are put through a quadrature over the prior and the
  // readings.
  const auto& all = part("global_risk");
  const double mean = figure(all, "prior_mean");
  const double sd = figure(all, "prior_sd");
  const double u = figure(all, "u");
  const Tolerance tolerance{all.at("tolerance").at(0).get<double>(), all.at("tolerance").at(1).get<double>()};
  for (const auto& one : all.at("items")) {
    const double r = figure(one, "r");
    if (r < 0) continue;  // a relaxed limit: no rule of this program
    INFO("r = " << r);
    const auto found = limits::decide(result(mean, u), tolerance, "ohm", {r});
    REQUIRE(found);
    CHECK(*found->acceptance.low == Approx(one.at("acceptance").at(0).get<double>()).epsilon(1e-12));
    const double low = *found->acceptance.low;
    const double high = *found->acceptance.high;
    double consumer = 0;
    double producer = 0;
    constexpr int kSteps = 40000;
    const double step = 14 * sd / kSteps;
    for (int i = 0; i < kSteps; ++i) {
      const double truth = mean + (i + 0.5) * step - 7 * sd;
      const double weight =
          std::exp(-0.5 * std::pow((truth - mean) / sd, 2)) / (sd * std::sqrt(2 * 3.141592653589793)) * step;
      const double accepted = phi((high - truth) / u) - phi((low - truth) / u);
      const bool conforms = truth >= *tolerance.low && truth <= *tolerance.high;
      (conforms ? producer : consumer) += weight * (conforms ? 1 - accepted : accepted);
    }
    CHECK(consumer == Approx(figure(one, "consumer_risk")).epsilon(1e-3));
    CHECK(producer == Approx(figure(one, "producer_risk")).epsilon(1e-3));
  }
}
