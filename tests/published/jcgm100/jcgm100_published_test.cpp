// JCGM 100:2008 annexes G and H: the worked examples.
#include <array>
#include <catch2/catch.hpp>
#include <cmath>
#include <fstream>
#include <limits>
#include <nlohmann/json.hpp>
#include <span>
#include <string>
#include <vector>

#include "analysis/estimate/budget.h"
#include "analysis/estimate/coverage.h"
#include "analysis/estimate/estimate.h"
#include "analysis/estimate/type_a.h"
#include "analysis/series/line.h"

using namespace loadstair;
using estimate::Estimate;

namespace {

const nlohmann::json& example(const std::string& name) {
  static const nlohmann::json all = [] {
    std::ifstream file{std::string{LOADSTAIR_SOURCE} + "/tests/published/jcgm100/examples.json"};
    REQUIRE(file);
    return nlohmann::json::parse(file);
  }();
  return all.at(name);
}

double figure(const nlohmann::json& from, const char* name) {
  return from.at(name).get<double>();
}

struct Impedance {
  Estimate r;
  Estimate x;
  Estimate z;
};

/// Checks against the recomputed ten digits and against the printed ones.
void check_against(const Impedance& found, const nlohmann::json& digits, double relative) {
  const auto near = [relative](double value) { return Approx(value).epsilon(relative); };
  CHECK(found.r.value() == near(figure(digits, "R")));
  CHECK(found.x.value() == near(figure(digits, "X")));
  CHECK(found.z.value() == near(figure(digits, "Z")));
  CHECK(found.r.standard_uncertainty() == near(figure(digits, "u_R")));
  CHECK(found.x.standard_uncertainty() == near(figure(digits, "u_X")));
  CHECK(found.z.standard_uncertainty() == near(figure(digits, "u_Z")));
  CHECK(estimate::correlation(found.r, found.x) == near(figure(digits, "r_RX")));
  CHECK(estimate::correlation(found.r, found.z) == near(figure(digits, "r_RZ")));
  CHECK(estimate::correlation(found.x, found.z) == near(figure(digits, "r_XZ")));
}

void check_printed(const Impedance& found, const nlohmann::json& printed) {
  // Printed to 0.001 (Z to 0.01). u_X = 0.295 is printed from the second approach; the first gives 0.2956.
  CHECK(found.r.value() == Approx(figure(printed, "R")).margin(0.0006));
  CHECK(found.x.value() == Approx(figure(printed, "X")).margin(0.0006));
  CHECK(found.z.value() == Approx(figure(printed, "Z")).margin(0.006));
  CHECK(found.r.standard_uncertainty() == Approx(figure(printed, "u_R")).margin(0.0006));
  CHECK(found.x.standard_uncertainty() == Approx(figure(printed, "u_X")).margin(0.001));
  CHECK(found.z.standard_uncertainty() == Approx(figure(printed, "u_Z")).margin(0.0006));
  CHECK(estimate::correlation(found.r, found.x) == Approx(figure(printed, "r_RX")).margin(0.0006));
  CHECK(estimate::correlation(found.r, found.z) == Approx(figure(printed, "r_RZ")).margin(0.0006));
  CHECK(estimate::correlation(found.x, found.z) == Approx(figure(printed, "r_XZ")).margin(0.0006));
}

}  // namespace

TEST_CASE("JCGM 100 H.2, first approach: correlated means through the chain rule") {
  const auto& data = example("H2").at("data");
  const auto volts = data.at("V_volt").get<std::vector<double>>();
  const auto milliamps = data.at("I_mA").get<std::vector<double>>();
  const auto radians = data.at("phi_rad").get<std::vector<double>>();
  std::vector<double> amps;
  for (const double i : milliamps) amps.push_back(i / 1000);
  const std::array<std::span<const double>, 3> sets{volts, amps, radians};
  const auto means = estimate::repeated_observations(sets, {"run", "H.2"});
  REQUIRE(means);
  const Estimate& v = (*means)[0];
  const Estimate& i = (*means)[1];
  const Estimate& phi = (*means)[2];

  const auto& input = example("H2").at("input_recomputed");
  CHECK(v.standard_uncertainty() == Approx(figure(input, "u_V")).epsilon(1e-9));
  CHECK(1000 * i.standard_uncertainty() == Approx(figure(input, "u_I_mA")).epsilon(1e-9));
  CHECK(phi.standard_uncertainty() == Approx(figure(input, "u_phi")).epsilon(1e-9));
  CHECK(estimate::correlation(v, i) == Approx(figure(input, "r_VI")).epsilon(1e-9));
  CHECK(estimate::correlation(v, phi) == Approx(figure(input, "r_Vphi")).epsilon(1e-9));
  CHECK(estimate::correlation(i, phi) == Approx(figure(input, "r_Iphi")).epsilon(1e-9));

  const double angle = phi.value();
  const Estimate cosine = estimate::combine(std::cos(angle), {{phi, -std::sin(angle)}});
  const Estimate sine = estimate::combine(std::sin(angle), {{phi, std::cos(angle)}});
  const Impedance found{v / i * cosine, v / i * sine, v / i};
  check_against(found, example("H2").at("result_recomputed_first_approach"), 1e-9);
  check_printed(found, example("H2").at("result_published_first_approach"));
  // Five sets of readings give four degrees of freedom to whatever is computed from them together.
  CHECK(estimate::effective_degrees_of_freedom(found.r) == Approx(4).epsilon(1e-12));
}

TEST_CASE("JCGM 100 H.2, second approach: the results of each set") {
  const auto& data = example("H2").at("data");
  std::vector<double> r;
  std::vector<double> x;
  std::vector<double> z;
  for (std::size_t k = 0; k < 5; ++k) {
    const double v = data.at("V_volt").at(k);
    const double i = data.at("I_mA").at(k).get<double>() / 1000;
    const double phi = data.at("phi_rad").at(k);
    r.push_back(v / i * std::cos(phi));
    x.push_back(v / i * std::sin(phi));
    z.push_back(v / i);
  }
  const std::array<std::span<const double>, 3> sets{r, x, z};
  const auto found = estimate::repeated_observations(sets, {"run", "H.2"});
  REQUIRE(found);
  check_against({(*found)[0], (*found)[1], (*found)[2]},
                example("H2").at("result_recomputed_second_approach"), 1e-9);
}

TEST_CASE("JCGM 100 H.2, correlation ignored: inputs with sources of their own (table H.5)") {
  const auto& input = example("H2").at("input_recomputed");
  const auto own = [](const char* name, double value, double u) {
    return Estimate{value, estimate::make_type_a(name, name, 4), u};
  };
  const Estimate v = own("V", figure(input, "mean_V"), figure(input, "u_V"));
  const Estimate i = own("I", figure(input, "mean_I_mA") / 1000, figure(input, "u_I_mA") / 1000);
  const Estimate phi = own("phi", figure(input, "mean_phi"), figure(input, "u_phi"));
  const Estimate cosine = estimate::combine(std::cos(phi.value()), {{phi, -std::sin(phi.value())}});
  const Estimate sine = estimate::combine(std::sin(phi.value()), {{phi, std::cos(phi.value())}});
  const Estimate r = v / i * cosine;
  const Estimate x = v / i * sine;
  const Estimate z = v / i;
  const auto& expected = example("H2").at("result_ignoring_input_correlation");
  CHECK(r.standard_uncertainty() == Approx(figure(expected, "u_R")).epsilon(1e-8));
  CHECK(x.standard_uncertainty() == Approx(figure(expected, "u_X")).epsilon(1e-8));
  CHECK(z.standard_uncertainty() == Approx(figure(expected, "u_Z")).epsilon(1e-8));
  CHECK(estimate::correlation(r, x) == Approx(figure(expected, "r_RX")).epsilon(1e-8));
  CHECK(estimate::correlation(r, z) == Approx(figure(expected, "r_RZ")).epsilon(1e-8));
  CHECK(estimate::correlation(x, z) == Approx(figure(expected, "r_XZ")).epsilon(1e-8));
}

namespace {

estimate::SourcePtr gauge_source(const char* name, estimate::Distribution distribution,
                                 double degrees_of_freedom) {
  estimate::Source source;
  source.key = name;
  source.name = name;
  source.distribution = distribution;
  source.degrees_of_freedom = degrees_of_freedom;
  return estimate::make_source(source);
}

}  // namespace

TEST_CASE("JCGM 100 H.1: the end gauge, with degrees of freedom of Type B sources") {
  using enum estimate::Distribution;
  const double many = std::numeric_limits<double>::infinity();
  const auto normally = [](const char* name, double x, double u, double nu) {
    return Estimate{x, gauge_source(name, normal, nu), u};
  };
  // Inputs as printed; rectangular and arcsine ones from their half-widths.
  const Estimate ls = normally("ls", 50000623, 25, 18);
  const Estimate d = normally("dbar", 215, 5.8, 24) + normally("d1", 0, 3.9, 5) + normally("d2", 0, 6.7, 8);
  const Estimate alpha_s = estimate::bounded(9.5e-6, 13.5e-6, gauge_source("alpha_s", rectangular, many));
  const Estimate delta_alpha = estimate::bounded(-1e-6, 1e-6, gauge_source("delta_alpha", rectangular, 50));
  const Estimate theta =
      normally("theta_bar", -0.1, 0.2, many) +
      Estimate{0, gauge_source("Delta", arcsine, many), 0.5 / estimate::half_width_per_u(arcsine, 0)};
  const Estimate delta_theta = estimate::bounded(-0.05, 0.05, gauge_source("delta_theta", rectangular, 2));
  const Estimate length = ls + d - ls * (delta_alpha * theta + alpha_s * delta_theta);

  const auto& recomputed = example("H1").at("recomputed");
  const auto& printed = example("H1").at("published");
  CHECK(length.value() == Approx(figure(printed, "l")).margin(0.5));
  CHECK(d.standard_uncertainty() == Approx(figure(recomputed, "u_d")).epsilon(1e-6));
  CHECK(estimate::effective_degrees_of_freedom(d) == Approx(figure(recomputed, "nu_d")).epsilon(1e-6));
  CHECK(length.standard_uncertainty() == Approx(figure(recomputed, "u_c")).epsilon(1e-6));
  CHECK(length.standard_uncertainty() == Approx(figure(printed, "u_c")).margin(0.5));
  const double nu = estimate::effective_degrees_of_freedom(length);
  CHECK(nu == Approx(figure(recomputed, "nu_eff")).epsilon(1e-6));
  CHECK(nu == Approx(figure(printed, "nu_eff")).margin(0.06));
  CHECK(estimate::student_t(0.99, 16) == Approx(figure(recomputed, "t99_16")).margin(5e-7));
  CHECK(estimate::student_t(0.99, 16) * length.standard_uncertainty() ==
        Approx(figure(printed, "U99")).margin(1));  // 92.48, printed rounded up as 93

  const auto lines = estimate::budget(length).lines;
  // alpha_s, theta_bar and Delta drop out at zero sensitivity, as in table H.1.
  REQUIRE(lines.size() == 6);
  CHECK(lines[0].name == "ls");
  CHECK(lines[1].name == "delta_theta");
  CHECK(lines[1].standard_uncertainty == Approx(figure(printed, "contribution_delta_theta")).margin(0.05));
}

TEST_CASE("JCGM 100 G.4.1: effective degrees of freedom of a product") {
  const auto& given = example("G4_1");
  Estimate product{1};
  for (std::size_t k = 0; k < 3; ++k) {
    const double nu = given.at("n").at(k).get<double>() - 1;
    const std::string name = "X" + std::to_string(k + 1);
    product = product * Estimate{1, estimate::make_type_a(name, name, nu),
                                 given.at("relative_u_percent").at(k).get<double>() / 100};
  }
  const auto interval = estimate::coverage(product);
  const auto& recomputed = given.at("recomputed");
  CHECK(100 * interval.standard_uncertainty == Approx(figure(recomputed, "u_rel_percent")).epsilon(1e-7));
  CHECK(interval.degrees_of_freedom == Approx(figure(recomputed, "nu_eff")).epsilon(1e-7));
  CHECK(interval.degrees_of_freedom == Approx(figure(given.at("published"), "nu_eff")).margin(0.05));
  CHECK(interval.k == Approx(figure(given.at("published"), "t95")).margin(0.005));
  CHECK(100 * interval.expanded == Approx(figure(given.at("published"), "U95_percent")).margin(0.05));
}

TEST_CASE("JCGM 100 H.3: the calibration line") {
  const auto& given = example("H3");
  const auto t = given.at("t_k").get<std::vector<double>>();
  const auto b = given.at("b_k").get<std::vector<double>>();
  const auto line = series::fit_line({t, b});
  REQUIRE(line);
  const auto& recomputed = given.at("recomputed");
  const auto& printed = given.at("published");
  CHECK(line->at(figure(given, "t0")) == Approx(figure(recomputed, "y1")).epsilon(1e-9));
  CHECK(line->slope_per_s == Approx(figure(recomputed, "y2")).epsilon(1e-9));
  CHECK(line->slope_u_per_s == Approx(figure(recomputed, "s_y2")).epsilon(1e-9));
  CHECK(line->residual_deviation == Approx(figure(recomputed, "s")).epsilon(1e-9));
  CHECK(line->slope_per_s == Approx(figure(printed, "y2")).margin(0.000005));
  CHECK(line->slope_u_per_s == Approx(figure(printed, "s_y2")).margin(0.000005));
  CHECK(line->at(30) == Approx(figure(printed, "b_30")).margin(0.00005));
}
