#include <catch2/catch.hpp>
#include <nlohmann/json.hpp>

#include "daemon/command/result_text.h"
#include "daemon/service/result_json.h"

using namespace loadstair;
using nlohmann::json;

namespace {

evaluation::Quantity known(double value, double expanded, const std::string& unit) {
  evaluation::Quantity quantity;
  quantity.known = true;
  quantity.value = value;
  quantity.unit = unit;
  quantity.low = value - expanded;
  quantity.high = value + expanded;
  quantity.method = "linear";
  quantity.expanded = expanded;
  quantity.k = 1.96;
  return quantity;
}

evaluation::Quantity refused(const std::string& why) {
  evaluation::Quantity quantity;
  quantity.why = why;
  return quantity;
}

}  // namespace

TEST_CASE("an estimate prints its interval, a refused one its reason") {
  const json estimate = service::to_json(known(0.9642, 0.0031, "1"));
  CHECK(estimate["value"] == 0.9642);
  CHECK(estimate["unit"] == "1");
  CHECK(estimate["low"].get<double>() == Approx(0.9611));
  CHECK(estimate["high"].get<double>() == Approx(0.9673));
  CHECK(estimate["level"] == 0.95);
  CHECK(estimate["method"] == "linear");
  CHECK(estimate["k"] == 1.96);
  const json none = service::to_json(refused("apparent power only"));
  CHECK(none == json{{"value", nullptr}, {"why", "apparent power only"}});
  auto bare = known(1.41, 0.0, "1");
  bare.uncertainty_known = false;
  bare.why = "uncertainty not known";
  const json indicated = service::to_json(bare);
  CHECK(indicated["value"].is_null());
  CHECK(indicated["indicated"] == 1.41);
  CHECK(indicated["why"] == "uncertainty not known");
}

// Two significant digits of the expanded uncertainty, value to the same place: JCGM 100:2008 7.2.6.
TEST_CASE("an estimate in text carries two digits of its interval") {
  CHECK(command::estimate_text(service::to_json(known(0.96424, 0.00312, "1")), 100.0) == "96.42 \u00b10.31");
  CHECK(command::estimate_text(service::to_json(known(38.4961, 0.0042, "W"))) == "38.4961 \u00b10.0042");
  CHECK(command::estimate_text(service::to_json(known(623.4, 12.0, "W"))) == "623 \u00b112");
  CHECK(command::estimate_text(service::to_json(refused("missing channel"))) == "-");
}

TEST_CASE("a table shows every step, also those without results, and never a NaN") {
  evaluation::RunResult result;
  result.run = 4;
  result.prototype = "Marten";
  result.revision = "D";
  result.unit = "D-001";
  result.state = "done";
  evaluation::StepResult step;
  step.label = "50 %";
  step.load_w = 300;
  step.input_power = known(310.2, 0.4, "W");
  step.output_power = known(300.1, 0.3, "W");
  step.efficiency = known(0.9674, 0.0015, "1");
  step.loss = known(10.1, 0.5, "W");
  step.power_factor = refused("no wattmeter");
  step.thd_voltage = refused("no capture");
  step.crest_factor = refused("no capture");
  step.settled.settled = true;
  step.settled.by = "rate";
  result.steps.push_back(step);
  step.label = "100 %";
  step.efficiency = refused("apparent power only");
  step.settled.settled = false;
  step.settled.by = "not settled";
  result.steps.push_back(step);
  const std::string text = command::result_table(service::to_json(result));
  CHECK(text.find("96.74 \u00b10.15") != std::string::npos);
  CHECK(text.find("100 %: no efficiency: apparent power only") != std::string::npos);
  CHECK(text.find("by rate") != std::string::npos);
  CHECK(text.find("NO") != std::string::npos);
  CHECK(text.find("nan") == std::string::npos);
}

TEST_CASE("instants print as ISO 8601") {
  CHECK(service::iso_time(0) == "1970-01-01T00:00:00.000Z");
  // 1234567890 s is 2009-02-13T23:31:30Z: POSIX time, widely printed.
  CHECK(service::iso_time(1'234'567'890'123'000'000) == "2009-02-13T23:31:30.123Z");
}
