// The sample files are what the documentation points at: they must load, fit each other, and say what they
// should.
#include <algorithm>
#include <catch2/catch.hpp>

#include "daemon/setup/explain.h"
#include "daemon/setup/hookup.h"
#include "daemon/setup/profile_file.h"
#include "daemon/setup/stair.h"

namespace loadstair::setup {
namespace {

const std::string kSamples = LOADSTAIR_SOURCE "/sample-captures/";

Hookup hookup(const std::string& name) {
  auto read = load_hookup(kSamples + name);
  if (!read) FAIL(read.refusal().text());
  return *std::move(read);
}

Stair stair(const std::string& name) {
  auto read = load_stair(kSamples + name);
  if (!read) FAIL(read.refusal().text());
  return *std::move(read);
}

std::size_t saying(const std::vector<Finding>& findings, Severity severity, std::string_view text) {
  return static_cast<std::size_t>(
      std::count_if(findings.begin(), findings.end(), [&](const Finding& finding) {
        return finding.severity == severity && finding.text.find(text) != std::string::npos;
      }));
}

TEST_CASE("the Marten's bench and stair load and fit") {
  const Hookup bench = hookup("north_bench.hookup.json");
  const Stair plan = stair("marten.stair.json");
  const auto matched = match(plan, bench);
  INFO((matched ? "" : matched.refusal().text()));
  CHECK(matched.ok());
  CHECK(bench.instruments.size() == 6);
  CHECK(bench.find_instrument("ac load")->link.host == "127.0.0.1");
  CHECK(bench.find_instrument("ac load")->link.port == 5601);
  CHECK(bench.find_channel("input voltage")->typed);
  CHECK(bench.find_channel("input current")->conversion.shunt->resistance_ohm == 0.1);
  CHECK(bench.find_channel("output power")->response == Response::wattmeter);
  CHECK(bench.find_port("output")->kind == PortKind::ac);
  CHECK(bench.controls[1].at_start ==
        std::vector<std::pair<std::string, double>>{{"voltage", 385}, {"current", 3}});
  REQUIRE(bench.rehearsal);
  CHECK(bench.rehearsal->converter.at("no_load_w") == 6.5);
  REQUIRE(plan.steps.size() == 14);
  CHECK(plan.steps[0].label == "zero before");
  CHECK(plan.steps[1].label == "standby");
  CHECK(plan.steps[2].label == "no load");
  CHECK(plan.steps[5].label == "20 %");
  CHECK(plan.steps[5].load_w == 120.0);
  CHECK(plan.steps[5].set[0].value == 120.0);
  CHECK(plan.steps[5].thermal->by_prediction);
  CHECK(plan.steps[10].label == "lamps 120 W");
  CHECK(plan.steps[12].kind == StepKind::closure);
  CHECK(plan.steps[12].set[0].value == 300.0);
  CHECK(plan.steps[13].label == "zero after");
  CHECK(plan.limits.size() == 4);
  CHECK(plan.guards[2].action == GuardAction::hold);
}

TEST_CASE("the Stoat's stair goes over its levels at each input voltage") {
  const Stair plan = stair("stoat.stair.json");
  CHECK(match(plan, hookup("stoat.hookup.json")).ok());
  REQUIRE(plan.steps.size() == 12);
  CHECK(plan.steps[0].kind == StepKind::tie);
  CHECK(plan.steps[1].label == "tie voltmeters, 12.5 V");
  CHECK(plan.steps[2].label == "10 % at 44 V");
  CHECK(plan.steps[11].label == "100 % at 54 V");
  REQUIRE(plan.steps[11].set.size() == 2);
  CHECK(plan.steps[11].set[0].control == "source");
  CHECK(plan.steps[11].set[0].value == 54.0);
  // 240 W at 12 V.
  CHECK(plan.steps[11].set[1].value == Approx(20.0));
}

TEST_CASE("the Stoat's undeclared output lead is not passed over in silence") {
  const Stair plan = stair("stoat.stair.json");
  const auto findings = cautions(hookup("stoat.hookup.json"), &plan);
  // Ohm's law: 20 A through 5 milliohm is 2 W of 240 W, 0.833 %.
  CHECK(saying(findings, Severity::warning,
               "port \"output\": nothing says where its voltage is sensed. At 20.0 A every "
               "5 milliohm of lead") == 1);
  CHECK(saying(findings, Severity::warning, "is 2.00 W of 240 W (0.833 %)") == 1);
  CHECK(saying(findings, Severity::warning, "port \"input\": nothing says where") == 0);
  CHECK(saying(findings, Severity::error, "") == 0);
}

TEST_CASE("the Marten's findings: no error, and the cautions of a live bench") {
  const Stair plan = stair("marten.stair.json");
  const auto findings = cautions(hookup("north_bench.hookup.json"), &plan);
  CHECK(saying(findings, Severity::error, "") == 0);
  CHECK(saying(findings, Severity::warning, "") == 0);
  for (const auto* caution :
       {"not a safety device", "prove dead with a tester", "Both DC rails", "scope's ground",
        "Thermocouples on live tabs", "Lamps and resistors", "never work alone"}) {
    CHECK(saying(findings, Severity::note, caution) >= 1);
  }
}

TEST_CASE("only the queries that a channel needs are kept") {
  const Hookup bench = hookup("stoat.hookup.json");
  REQUIRE(bench.find_instrument("input voltmeter")->profile.queries.size() == 1);
  CHECK(bench.find_instrument("input voltmeter")->profile.queries[0].text == "MEAS:VOLT:DC?");
  CHECK(bench.find_instrument("dc load")->profile.queries.empty());
}

TEST_CASE("every built-in profile can be read and is named after its file") {
  const auto names = built_in_profile_names();
  for (const auto* wanted : {"scpi-meter", "scpi-power-meter", "scpi-load", "scpi-source", "text-line",
                             "thermocouple-lines", "scope-folder"}) {
    CHECK(std::find(names.begin(), names.end(), wanted) != names.end());
  }
  for (const auto name : names) {
    const auto profile = find_profile(std::string{name}, "x.json");
    REQUIRE(profile);
    CHECK(profile->name == name);
    CHECK(has_conversation(*profile) == (name != "scope-folder"));
  }
}

}  // namespace
}  // namespace loadstair::setup
