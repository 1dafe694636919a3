#include "daemon/command/forecast_text.h"

#include <catch2/catch.hpp>
#include <nlohmann/json.hpp>

using namespace loadstair;
using nlohmann::json;

namespace {

json power(double value, double half_width) {
  return {{"value", value}, {"unit", "W"},        {"low", value - half_width}, {"high", value + half_width},
          {"level", 0.95},  {"method", "linear"}, {"expanded", half_width},    {"k", 1.96}};
}

json step(const std::string& label, json efficiency) {
  const json line = {{"source", "A1 on 10 A: offset"}, {"share", 0.83}};
  return {{"label", label},
          {"kind", "level"},
          {"input_power", power(25.3, 0.3)},
          {"output_power", power(24.0, 0.04)},
          {"efficiency", std::move(efficiency)},
          {"loss", power(1.26, 0.26)},
          {"budget", json::array({line})},
          {"loss_budget", json::array()},
          {"helps_most",
           {{"source", "A1 on 10 A: offset"},
            {"action", "use a range nearer to the reading"},
            {"expanded_if_done", 0.003}}},
          {"remarks", json::array()}};
}

}  // namespace

// The light loads, where linear propagation holds least, are those that need the advice most.
TEST_CASE("a forecast by Monte Carlo has its advice too, beside half of its interval") {
  json drawn = {{"value", 0.9503}, {"unit", "1"},   {"low", 0.9410},
                {"high", 0.9594},  {"level", 0.95}, {"method", "monte-carlo"}};
  json linear = power(0.9499, 0.0045);
  linear["unit"] = "1";
  const json forecast = {{"steps", {step("10 %", drawn), step("25 %", linear)}},
                         {"bench_checks", json::array()},
                         {"remarks", json::array()}};
  const std::string text = command::forecast_text(forecast);
  CHECK(text.find("95.03 (94.10 to 95.94)") != std::string::npos);
  CHECK(text.find("10 %: \u00b10.92 to \u00b10.30, 25 %: \u00b10.45 to \u00b10.30") != std::string::npos);
}

TEST_CASE("a forecast without an efficiency says why, and gives no advice") {
  const json none = {{"value", nullptr}, {"why", "apparent power only"}};
  const json forecast = {
      {"steps", {step("10 %", none)}}, {"bench_checks", json::array()}, {"remarks", json::array()}};
  const std::string text = command::forecast_text(forecast);
  CHECK(text.find("10 %: no efficiency: apparent power only") != std::string::npos);
  CHECK(text.find("would help") == std::string::npos);
}
