// European and CEC weights, the constructed examples, and efficiency uncertainty with correlation.
#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <fstream>
#include <nlohmann/json.hpp>
#include <string>
#include <vector>

#include "analysis/efficiency/efficiency.h"

using namespace loadstair;
using efficiency::CurvePoint;
using efficiency::Scheme;
using estimate::Estimate;

namespace {

const nlohmann::json& examples() {
  static const nlohmann::json all = [] {
    std::ifstream file{std::string{LOADSTAIR_SOURCE} + "/tests/published/weighted_efficiency/examples.json"};
    REQUIRE(file);
    return nlohmann::json::parse(file);
  }();
  return all;
}

constexpr double kRated = 600;

CurvePoint point(double input_w, double output_w, std::string label = "level") {
  return {std::move(label), Estimate{input_w}, Estimate{output_w}, Estimate{input_w - output_w},
          Estimate{output_w / input_w}};
}

/// A curve with these efficiencies at these shares of rated power, on the basis of the scheme.
std::vector<CurvePoint> curve_of(const nlohmann::json& percent_by_load, Scheme scheme) {
  std::vector<CurvePoint> out;
  for (const auto& [load, percent] : percent_by_load.items()) {
    const double power = std::stoi(load) / 100.0 * kRated;
    const double eta = percent.get<double>() / 100;
    out.push_back(scheme == Scheme::european ? point(power, power * eta) : point(power / eta, power));
  }
  std::sort(out.begin(), out.end(),
            [](const auto& a, const auto& b) { return a.output_power.value() < b.output_power.value(); });
  return out;
}

double weighted_percent(const nlohmann::json& percent_by_load, Scheme scheme) {
  const auto points = curve_of(percent_by_load, scheme);
  const auto found = efficiency::weighted_efficiency(scheme, kRated, points, nullptr);
  REQUIRE(found.efficiency);
  return 100 * found.efficiency->value();
}

double loss_of(double p) {
  const auto& model = examples().at("loss_model_example");
  return model.at("k0").get<double>() + p * (model.at("k1").get<double>() + p * model.at("k2").get<double>());
}

}  // namespace

TEST_CASE("European and CEC weights are the published ones") {
  for (const auto& [name, scheme] :
       {std::pair{"european", Scheme::european}, std::pair{"cec", Scheme::cec}}) {
    const auto& published = examples().at(name).at("weights");
    const auto levels = efficiency::levels(scheme);
    REQUIRE(levels.size() == published.size());
    double sum = 0;
    for (const auto& level : levels) {
      const auto load = std::to_string(static_cast<int>(std::round(100 * level.fraction)));
      INFO(name << " " << load);
      CHECK(level.weight == Approx(published.at(load).get<double>()).epsilon(1e-14));
      sum += level.weight;
    }
    CHECK(sum == Approx(1).epsilon(1e-14));
  }
}

TEST_CASE("the constructed curves have their exact weighted efficiencies") {
  for (const auto& one : examples().at("constructed_examples")) {
    const auto& curve = one.at("efficiency_percent");
    CHECK(weighted_percent(curve, Scheme::european) ==
          Approx(one.at("european_percent").get<double>()).epsilon(1e-12));
    CHECK(weighted_percent(curve, Scheme::cec) == Approx(one.at("cec_percent").get<double>()).epsilon(1e-12));
  }
}

TEST_CASE("CEC over three voltages is the mean of their weighted figures") {
  const auto& given = examples().at("cec_18_point_example");
  std::vector<efficiency::Weighted> by_voltage;
  for (const auto& [voltage, curve] : given.at("efficiency_percent").items()) {
    const auto points = curve_of(curve, Scheme::cec);
    by_voltage.push_back(efficiency::weighted_efficiency(Scheme::cec, kRated, points, nullptr, voltage));
    REQUIRE(by_voltage.back().efficiency);
    CHECK(by_voltage.back().title == "CEC-weighted at " + voltage);
    CHECK(100 * by_voltage.back().efficiency->value() ==
          Approx(given.at("weighted_by_voltage").at(voltage).get<double>()).epsilon(1e-12));
  }
  const auto mean = efficiency::cec_over_voltages(by_voltage);
  REQUIRE(mean.efficiency);
  CHECK(100 * mean.efficiency->value() == Approx(given.at("mean").get<double>()).epsilon(1e-12));
  by_voltage.pop_back();
  CHECK_FALSE(efficiency::cec_over_voltages(by_voltage).efficiency);
}

TEST_CASE("the loss model finds its coefficients, its peak and a level that was not measured") {
  const auto& given = examples().at("loss_model_example");
  std::vector<CurvePoint> points;
  for (const double p : {0.05, 0.1, 0.2, 0.3, 0.5, 1.0}) {
    points.push_back(point(kRated * (p + loss_of(p)), kRated * p));
    const auto load = std::to_string(static_cast<int>(std::round(100 * p)));
    CHECK(points.back().efficiency.value() ==
          Approx(given.at("eta_by_load_percent").at(load).get<double>()).epsilon(1e-12));
  }
  const auto model = efficiency::fit_loss_model(points, 0.001);
  REQUIRE(model);
  CHECK(model->p0.value() == Approx(kRated * given.at("k0").get<double>()).epsilon(1e-9));
  CHECK(model->p1.value() == Approx(given.at("k1").get<double>()).epsilon(1e-9));
  CHECK(model->p2.value() == Approx(given.at("k2").get<double>() / kRated).epsilon(1e-9));
  CHECK_FALSE(model->lack_of_fit);
  CHECK(model->lack_of_fit_tested);
  const auto peak = model->peak_power();
  REQUIRE(peak);
  CHECK(peak->value() / kRated == Approx(given.at("peak_at_p").get<double>()).epsilon(1e-9));
  CHECK(model->efficiency_at(peak->value()).value() ==
        Approx(given.at("peak_eta").get<double>()).epsilon(1e-9));

  // 75 % was not measured: it comes from the model.
  const auto cec = efficiency::weighted_efficiency(Scheme::cec, kRated, points, &*model);
  REQUIRE(cec.efficiency);
  CHECK(cec.efficiency->value() == Approx(given.at("cec").get<double>()).epsilon(1e-9));
  CHECK(cec.uses[4].from == "loss model");
  CHECK_FALSE(efficiency::weighted_efficiency(Scheme::cec, kRated, points, nullptr).efficiency);
}

TEST_CASE("efficiency and loss with correlated meters agree with the closed formula") {
  for (const auto& item : examples().at("efficiency_uncertainty_examples").at("items")) {
    const double r = item.at("correlation_between_equal_quantities");
    const auto& u = item.at("relative_standard_uncertainty");
    // The shared part of the two voltages (and of the two currents) is one source.
    const auto measured = [&](const char* name, std::size_t which, const char* shared) {
      const double value = item.at(name);
      const double uncertainty = value * u.at(which).get<double>();
      const auto normal = estimate::Distribution::normal;
      return Estimate{value, estimate::make_type_b(shared, shared, normal), uncertainty * std::sqrt(r)} +
             Estimate{0, estimate::make_type_b(name, name, normal), uncertainty * std::sqrt(1 - r)};
    };
    efficiency::StepInput step;
    for (const auto role : {efficiency::Role::input, efficiency::Role::output}) {
      efficiency::Port port;
      port.role = role;
      port.sensing = efficiency::Sensing::at_terminals;
      step.ports.push_back(port);
    }
    step.readings.resize(2);
    step.readings[0].voltage = measured("Vin", 0, "voltage");
    step.readings[0].current = measured("Iin", 1, "current");
    step.readings[1].voltage = measured("Vout", 2, "voltage");
    step.readings[1].current = measured("Iout", 3, "current");
    const auto result = efficiency::step_result(step);
    REQUIRE(result.efficiency);
    CHECK(result.efficiency->value() == Approx(item.at("efficiency").get<double>()).epsilon(1e-12));
    CHECK(result.efficiency->standard_uncertainty() ==
          Approx(item.at("u_efficiency").get<double>()).epsilon(1e-9));
    CHECK(result.loss->value() == Approx(item.at("loss_W").get<double>()).epsilon(1e-9));
    CHECK(result.loss->standard_uncertainty() == Approx(item.at("u_loss_W").get<double>()).epsilon(1e-9));
    // Two million draws, printed to five digits: their own scatter is 0.05 %, with 0.3 % allowed by the
    // source.
    CHECK(result.efficiency->standard_uncertainty() ==
          Approx(item.at("monte_carlo_u_efficiency").get<double>()).epsilon(0.003));
  }
}
