// The rate criterion and the fits against closed forms. Source: SOURCE.md.
#include <cmath>
#include <fstream>
#include <functional>
#include <nlohmann/json.hpp>
#include <vector>

#include "analysis/sensors/sensors.h"
#include "analysis/settling/settling.h"
#include "analysis/settling/three_points.h"
#include "tests/published/table.h"

namespace loadstair::settling {
namespace {

using nlohmann::json;
using published::number;

json figures() {
  std::ifstream file{std::string{LOADSTAIR_SOURCE} + "/tests/published/thermal/steady_state.json"};
  return json::parse(file);
}

/// Whether the criterion is met at `end_s` by readings every 5 s.
bool met_at(double end_s, const std::function<double(double)>& rise, const RateCriterion& criterion) {
  std::vector<double> time_s, value;
  for (double t = std::fmod(end_s, 5.0); t <= end_s + 1e-9; t += 5.0) {
    time_s.push_back(t);
    value.push_back(rise(t));
  }
  const auto verdict = settled_by_rate({time_s, value}, criterion);
  REQUIRE(verdict);
  return verdict->settled;
}

TEST_CASE("a rate criterion is first met when the closed form says") {
  const json cases = figures()["single_exponential"]["cases"];
  REQUIRE(cases.size() == 20);
  for (const json& item : cases) {
    const double final_rise = item["final_rise_K"];
    const double tau = item["tau_s"];
    const double met = item["first_time_met_s"];
    INFO(final_rise << " K, " << tau << " s, " << item["criterion"].get<std::string>());
    const auto rise = [&](double t) { return -final_rise * std::expm1(-t / tau); };
    RateCriterion criterion;
    criterion.change = item["delta_K"];
    criterion.window_s = item["window_s"];
    // A line over window/20 read off at its end bends with the curve: within 1 % of the time.
    CHECK_FALSE(met_at(0.99 * met, rise, criterion));
    CHECK(met_at(1.01 * met, rise, criterion));
  }
}

TEST_CASE("the wait that is announced ends when the closed form says") {
  for (const json& item : figures()["single_exponential"]["cases"]) {
    const double final_rise = item["final_rise_K"];
    const double tau = item["tau_s"];
    const double met = item["first_time_met_s"];
    RateCriterion criterion;
    criterion.change = item["delta_K"];
    criterion.window_s = item["window_s"];
    std::vector<double> time_s, value;
    for (double t = 0.0; t < 0.5 * met; t += 5.0) {
      time_s.push_back(t);
      value.push_back(-final_rise * std::expm1(-t / tau));
    }
    const auto verdict = settled_by_rate({time_s, value}, criterion);
    INFO(final_rise << " K, " << tau << " s, " << item["criterion"].get<std::string>());
    REQUIRE(verdict);
    CHECK_FALSE(verdict->settled);
    REQUIRE(verdict->wait_s);
    CHECK(time_s.back() + *verdict->wait_s == Approx(met).epsilon(1e-5));
  }
}

TEST_CASE("with two time constants the criterion is met when root finding says, and so much is missing") {
  const json two = figures()["two_time_constants"];
  const auto rise = [](double t) { return -18.0 * std::expm1(-t / 180.0) - 27.0 * std::expm1(-t / 2400.0); };
  for (const json& item : two["criterion_times"]) {
    if (!item.contains("window_s")) continue;
    const double met = item["first_time_met_s"];
    RateCriterion criterion;
    criterion.change = item["delta_K"];
    criterion.window_s = item["window_s"];
    INFO(item["criterion"].get<std::string>());
    CHECK_FALSE(met_at(0.99 * met, rise, criterion));
    CHECK(met_at(1.01 * met, rise, criterion));
    CHECK(rise(met) == Approx(item["rise_K"].get<double>()).epsilon(1e-12));
    CHECK(45.0 - rise(met) == Approx(item["remaining_K"].get<double>()).epsilon(1e-9));
  }
}

TEST_CASE("a limit of 1 K/h on the slope itself is met when the published root says") {
  const auto rise = [](double t) { return -18.0 * std::expm1(-t / 180.0) - 27.0 * std::expm1(-t / 2400.0); };
  for (const json& item : figures()["two_time_constants"]["criterion_times"]) {
    if (item.contains("window_s")) continue;
    const double met = item["first_time_met_s"];
    const auto settled_at = [&](double end_s) {
      std::vector<double> time_s, value;
      for (double t = end_s - 40.0; t <= end_s + 1e-9; t += 2.0) {
        time_s.push_back(t);
        value.push_back(rise(t));
      }
      const auto verdict = settled_by_slope({time_s, value}, {40.0, 1.0 / 3600.0, 5});
      REQUIRE(verdict);
      return verdict->settled;
    };
    // A line over 40 s shows the slope 20 s earlier: within 1 % of the time.
    CHECK_FALSE(settled_at(0.99 * met));
    CHECK(settled_at(1.01 * met));
  }
}

TEST_CASE("each published rule that has a change and a window is a setting of the rate criterion") {
  const json rules = figures()["rules"];
  REQUIRE(rules.size() == 12);
  for (const json& rule : rules) {
    RateCriterion criterion;
    criterion.change = rule["delta_K"];
    criterion.window_s = 60.0 * rule["window_min"].get<double>();
    criterion.count = rule.value("count", 1);
    INFO(rule["standard"].get<std::string>());
    // 45 K, 1800 s: the closed form of the file, and count - 1 windows more.
    const auto curve = [](double t) { return -45.0 * std::expm1(-t / 1800.0); };
    const double first =
        -1800.0 * std::log(criterion.change / (45.0 * std::expm1(criterion.window_s / 1800.0)));
    const double met = std::max(first, criterion.window_s) + (criterion.count - 1) * criterion.window_s;
    CHECK_FALSE(met_at(0.99 * met, curve, criterion));
    CHECK(met_at(1.01 * met, curve, criterion));
  }
}

TEST_CASE("three readings at equal distances give the end and the constant") {
  const json examples = figures()["single_exponential"]["three_point_examples"];
  REQUIRE(examples.size() == 2);
  for (const json& item : examples) {
    const auto reading = [&](int i) { return estimate::Estimate{item["readings"][i].get<double>()}; };
    const auto found = three_point_end(reading(0), reading(1), reading(2), item["spacing_s"].get<double>());
    REQUIRE(found);
    CHECK(found->end.value() == Approx(item["final"].get<double>()).epsilon(1e-13));
    CHECK(found->tau_s.value() == Approx(item["tau_s"].get<double>()).epsilon(1e-13));
  }
}

TEST_CASE("a winding's rise by resistance") {
  const json cases = figures()["winding_by_resistance"]["cases"];
  REQUIRE(cases.size() == 3);
  for (const json& item : cases) {
    const auto rise = sensors::winding_rise_k(item["R1"], item["t1"], item["R2"], item["t2"], item["k"]);
    REQUIRE(rise);
    CHECK(*rise == Approx(item["rise_K"].get<double>()).epsilon(1e-13));
  }
}

TEST_CASE("fits find the constants of the published curve") {
  const auto rows = published::read_table("thermal/two_time_constants.csv");
  std::vector<double> time_s, exact, rounded;
  for (const auto& row : rows) {
    time_s.push_back(number(row, "t_s"));
    exact.push_back(number(row, "rise_K_exact"));
    rounded.push_back(number(row, "temperature_degC_rounded_0.01") - 23.4);
  }
  const auto two = fit_two_exponentials({time_s, exact});
  REQUIRE(two);
  CHECK(two->end == Approx(45.0).epsilon(1e-9));
  CHECK(two->amplitude[0] == Approx(18.0).epsilon(1e-8));
  CHECK(two->amplitude[1] == Approx(27.0).epsilon(1e-8));
  CHECK(two->tau_s[0] == Approx(180.0).epsilon(1e-8));
  CHECK(two->tau_s[1] == Approx(2400.0).epsilon(1e-8));

  // From 1800 s on one constant with an offset is left; figures of the file, computed with 60 s readings.
  const json figure = figures()["two_time_constants"]["fit_offset_single_exponential_from_1800s"];
  const auto late = fit_exponential(since({time_s, exact}, 1800.0));
  REQUIRE(late);
  CHECK(late->end == Approx(figure["final"].get<double>()).epsilon(1e-8));
  CHECK(late->tau_s[0] == Approx(figure["tau"].get<double>()).epsilon(1e-7));
  // Both count a trace's start differently: the amplitude is given at time zero.
  CHECK(late->amplitude[0] * std::exp(1800.0 / late->tau_s[0]) ==
        Approx(-figure["amplitude"].get<double>()).epsilon(1e-7));
  const auto rms = [](double sum, std::size_t count) { return std::sqrt(sum / static_cast<double>(count)); };
  CHECK(rms(late->residual_sum_of_squares, late->points) ==
        Approx(figure["rms_residual_K"].get<double>()).epsilon(1e-3));

  // One constant through zero, forced on two: the file's wrong answer, found too.
  const json forced = figures()["two_time_constants"]["fit_single_exponential_all_data"];
  const auto through_zero = fit_saturation(time_s, exact, 1e-3);
  REQUIRE(through_zero);
  CHECK(through_zero->amplitude[0] == Approx(forced["D"].get<double>()).epsilon(1e-6));
  CHECK(1.0 / through_zero->rate[0] == Approx(forced["tau"].get<double>()).epsilon(1e-6));
  CHECK(rms(through_zero->residual_sum_of_squares, time_s.size()) ==
        Approx(forced["rms_residual_K"].get<double>()).epsilon(1e-6));

  // Rounded to 0.01 K (standard deviation 0.003 K) the truth stays inside four standard errors.
  const auto coarse = fit_two_exponentials({time_s, rounded});
  REQUIRE(coarse);
  CHECK(std::abs(coarse->end - 45.0) < 4.0 * coarse->end_standard_error);
  CHECK(std::abs(coarse->tau_s[1] - 2400.0) < 4.0 * coarse->tau_standard_error_s[1]);
}

}  // namespace
}  // namespace loadstair::settling
