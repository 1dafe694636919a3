// Exponential fits against NIST's certified values. Source: SOURCE.md.
#include <cmath>
#include <fstream>
#include <nlohmann/json.hpp>
#include <vector>

#include "analysis/settling/settling.h"
#include "tests/published/table.h"

namespace loadstair::settling {
namespace {

using nlohmann::json;

json sets() {
  std::ifstream file{std::string{LOADSTAIR_SOURCE} + "/tests/published/strd_nonlinear/sets.json"};
  return json::parse(file);
}

double certified(const json& parameter, const char* what) {
  return base::parse_number(parameter[what].get<std::string>()).value();
}

/// Digits that agree: -log10 of the relative difference (NIST's LRE).
double digits(double got, double wanted) {
  return -std::log10(std::max(1e-16, std::abs(got - wanted) / std::abs(wanted)));
}

TEST_CASE("Misra1a and BoxBOD reach the certified values from both starts") {
  const json all = sets();
  for (const char* name : {"Misra1a", "BoxBOD"}) {
    const json& set = all[name];
    const auto x = set["x"].get<std::vector<double>>();
    const auto y = set["y"].get<std::vector<double>>();
    for (const char* start : {"start1", "start2"}) {
      const auto fit = fit_saturation(x, y, set["parameters"][1][start].get<double>());
      INFO(name << " from " << start);
      REQUIRE(fit);
      CHECK(digits(fit->amplitude[0], certified(set["parameters"][0], "certified")) > 8.5);
      CHECK(digits(fit->rate[0], certified(set["parameters"][1], "certified")) > 8.5);
      CHECK(digits(fit->amplitude_standard_error[0], certified(set["parameters"][0], "certified_sd")) > 7.0);
      CHECK(digits(fit->rate_standard_error[0], certified(set["parameters"][1], "certified_sd")) > 7.0);
      CHECK(digits(fit->residual_sum_of_squares, certified(set, "residual_sum_of_squares")) > 9.5);
      CHECK(digits(fit->residual_standard_deviation, certified(set, "residual_standard_deviation")) > 9.5);
    }
  }
}

TEST_CASE("Lanczos1 to 3, sums of three decays, reach the certified values from both starts") {
  const json all = sets();
  for (const char* name : {"Lanczos1", "Lanczos2", "Lanczos3"}) {
    const json& set = all[name];
    for (const char* start : {"start1", "start2"}) {
      const std::vector<double> rates = {set["parameters"][1][start], set["parameters"][3][start],
                                         set["parameters"][5][start]};
      const auto fit =
          fit_decays(set["x"].get<std::vector<double>>(), set["y"].get<std::vector<double>>(), rates);
      INFO(name << " from " << start);
      REQUIRE(fit);
      for (std::size_t i = 0; i < 3; ++i) {
        INFO("term " << i);
        CHECK(digits(fit->amplitude[i], certified(set["parameters"][2 * i], "certified")) > 6.0);
        CHECK(digits(fit->rate[i], certified(set["parameters"][2 * i + 1], "certified")) > 6.0);
        // The residual of Lanczos1, 1e-25, is below what binary64 data resolve: no standard error to compare.
        if (std::string{name} == "Lanczos1") continue;
        CHECK(digits(fit->amplitude_standard_error[i], certified(set["parameters"][2 * i], "certified_sd")) >
              4.0);
        CHECK(digits(fit->rate_standard_error[i], certified(set["parameters"][2 * i + 1], "certified_sd")) >
              4.0);
      }
    }
  }
}

TEST_CASE("MGH17, an end and two constants, is found without a start") {
  const json set = sets()["MGH17"];
  const auto x = set["x"].get<std::vector<double>>();
  const auto y = set["y"].get<std::vector<double>>();
  const auto fit = fit_two_exponentials({x, y});
  REQUIRE(fit);
  const auto wanted = [&](std::size_t i) { return certified(set["parameters"][i], "certified"); };
  const auto wanted_sd = [&](std::size_t i) { return certified(set["parameters"][i], "certified_sd"); };
  CHECK(digits(fit->end, wanted(0)) > 6.0);
  // y = end - sum amplitude exp(-t/tau): b2 and b4 are the slower term.
  CHECK(digits(-fit->amplitude[1], wanted(1)) > 6.0);
  CHECK(digits(-fit->amplitude[0], wanted(2)) > 6.0);
  CHECK(digits(1.0 / fit->tau_s[1], wanted(3)) > 6.0);
  CHECK(digits(1.0 / fit->tau_s[0], wanted(4)) > 6.0);
  CHECK(digits(fit->end_standard_error, wanted_sd(0)) > 5.0);
  CHECK(digits(fit->amplitude_standard_error[1], wanted_sd(1)) > 5.0);
  CHECK(digits(fit->tau_standard_error_s[1] / (fit->tau_s[1] * fit->tau_s[1]), wanted_sd(3)) > 5.0);
  CHECK(digits(fit->residual_sum_of_squares, certified(set, "residual_sum_of_squares")) > 6.0);
}

}  // namespace
}  // namespace loadstair::settling
