#include "daemon/setup/explain.h"

#include <algorithm>
#include <catch2/catch.hpp>

namespace loadstair::setup {
namespace {

// A bench by hand, so that each finding has one cause.
Hookup live_bench(Isolation isolation) {
  Hookup hookup;
  hookup.bench = "north bench";
  Instrument meter;
  meter.name = "wattmeter";
  meter.isolation = isolation;
  meter.poll_s = 0.5;
  meter.update_s = 0.2;
  meter.integration_s = 0.1;
  meter.delay_s = 0.05;
  hookup.instruments.push_back(meter);
  for (const auto* name : {"volts", "amps"}) {
    Channel channel;
    channel.name = name;
    channel.instrument = "wattmeter";
    channel.ranges.push_back({});
    hookup.channels.push_back(channel);
  }
  Port port;
  port.name = "output";
  port.direction = Direction::output;
  port.kind = PortKind::ac;
  port.voltage = "volts";
  port.current = "amps";
  port.live = true;
  hookup.ports.push_back(port);
  Port input;
  input.name = "input";
  input.voltage = "volts";
  input.current = "amps";
  hookup.ports.push_back(input);
  return hookup;
}

std::size_t saying(const std::vector<Finding>& findings, Severity severity, std::string_view text) {
  return static_cast<std::size_t>(
      std::count_if(findings.begin(), findings.end(), [&](const Finding& finding) {
        return finding.severity == severity && finding.text.find(text) != std::string::npos;
      }));
}

TEST_CASE("an instrument that is earthed, or may be, is refused on a live port, once") {
  CHECK(saying(cautions(live_bench(Isolation::earthed), nullptr), Severity::error,
               "instrument \"wattmeter\" is on port \"output\", which is live, and is tied to earth") == 1);
  CHECK(saying(cautions(live_bench(Isolation::unknown), nullptr), Severity::error,
               "nothing says whether it is isolated") == 1);
  CHECK(saying(cautions(live_bench(Isolation::isolated), nullptr), Severity::error, "") == 0);
  CHECK(saying(cautions(live_bench(Isolation::battery), nullptr), Severity::error, "") == 0);
}

TEST_CASE("a scope on a live port, a source that feeds it and a thermocouple reader are looked at too") {
  Hookup hookup = live_bench(Isolation::isolated);
  Instrument scope;
  scope.name = "scope";
  scope.isolation = Isolation::earthed;
  hookup.instruments.push_back(scope);
  CaptureSource capture;
  capture.instrument = "scope";
  capture.port = "output";
  hookup.captures.push_back(capture);
  CHECK(saying(cautions(hookup, nullptr), Severity::error, "instrument \"scope\"") == 1);
  hookup.captures.clear();
  hookup.controls.push_back({"load", "scope", "load", {}});
  CHECK(saying(cautions(hookup, nullptr), Severity::error, "instrument \"scope\"") == 1);
  hookup.controls[0].role = "source";  // the live port is the output; the source feeds the other one
  CHECK(saying(cautions(hookup, nullptr), Severity::error, "instrument \"scope\"") == 0);
  hookup.channels[0].instrument = "scope";
  hookup.ports[0].voltage = "amps";
  hookup.temperatures.push_back({"volts", "heatsink", ""});
  CHECK(saying(cautions(hookup, nullptr), Severity::error, "on temperature point \"heatsink\"") == 1);
}

TEST_CASE("volts times amps on an ac port is called apparent power") {
  Hookup hookup = live_bench(Isolation::isolated);
  CHECK(saying(cautions(hookup, nullptr), Severity::warning,
               "volts times amps is apparent power, not power") == 1);
  hookup.ports[0].power_factor_low = 0.95;
  CHECK(saying(cautions(hookup, nullptr), Severity::warning, "apparent power") == 0);
  hookup.ports[0].power_factor_low.reset();
  CaptureSource capture;
  capture.port = "output";
  capture.voltage_column = "1";
  capture.current_column = "2";
  hookup.captures.push_back(capture);
  CHECK(saying(cautions(hookup, nullptr), Severity::warning, "apparent power") == 0);
}

TEST_CASE("undeclared sensing is named where 10 milliohm are more than 0.1 % of the power, and only there") {
  Hookup hookup = live_bench(Isolation::isolated);
  Stair stair;
  // R I / V > 0.1 % at 10 milliohm means V / I < 10 ohm: 10 V and 10 W have exactly 10 ohm, which is not
  // more.
  stair.ratings = {10.0, 10.0, 10.0, 50.0, 40.0};
  CHECK(saying(cautions(hookup, &stair), Severity::warning, "nothing says where its voltage is sensed") == 0);
  stair.ratings = {10.0, 10.0, 10.1, 50.0, 40.0};
  CHECK(saying(cautions(hookup, &stair), Severity::warning, "nothing says where its voltage is sensed") == 2);
  hookup.ports[0].sensed = true;
  hookup.ports[1].lead_resistance_ohm = 0.004;
  CHECK(saying(cautions(hookup, &stair), Severity::warning, "nothing says where its voltage is sensed") == 0);
}

TEST_CASE(
    "a guard's worst time adds poll, update, integration, delay and debounce, and it acts on a control") {
  Hookup hookup = live_bench(Isolation::isolated);
  Stair stair;
  Guard guard;
  guard.name = "too high";
  guard.channel = "volts";
  guard.debounce_s = 0.3;
  stair.guards.push_back(guard);
  auto forecast = forecast_guards(stair, hookup);
  REQUIRE(forecast.size() == 1);
  CHECK(forecast[0].worst_s == Approx(0.5 + 0.2 + 0.1 + 0.05 + 0.3));
  CHECK(forecast[0].worst_missing_s == Approx(1.5));
  CHECK_FALSE(forecast[0].acts);
  CHECK(saying(cautions(hookup, &stair), Severity::warning, "guard \"too high\" can only tell you") == 1);
  hookup.controls.push_back({"load", "wattmeter", "load", {}});
  CHECK(forecast_guards(stair, hookup)[0].acts);
  CHECK(saying(cautions(hookup, &stair), Severity::warning, "can only tell you") == 0);
}

TEST_CASE("a guard on a meter that sends by itself misses readings after three of its own periods") {
  Hookup hookup = live_bench(Isolation::isolated);
  hookup.instruments[0].profile.dialect = instrument::Dialect::text_lines;
  Stair stair;
  Guard guard;
  guard.channel = "volts";
  stair.guards.push_back(guard);
  CHECK(forecast_guards(stair, hookup)[0].worst_missing_s == Approx(3 * 0.2));
  hookup.instruments[0].update_s = 0.0;  // not declared: the period at which it is looked at
  CHECK(forecast_guards(stair, hookup)[0].worst_missing_s == Approx(3 * 0.5));
}

TEST_CASE("a control must say who it is, where it can") {
  Hookup hookup = live_bench(Isolation::isolated);
  CHECK(saying(cautions(hookup, nullptr), Severity::error, "identity") == 0);
  hookup.controls.push_back({"load", "wattmeter", "load", {}});
  CHECK(saying(cautions(hookup, nullptr), Severity::error,
               "control \"load\": \"wattmeter\" declares no \"identity\"") == 1);
  hookup.instruments[0].identity = "NORTH BENCH";
  CHECK(saying(cautions(hookup, nullptr), Severity::error, "identity") == 0);
  hookup.instruments[0].identity.clear();
  hookup.instruments[0].profile.identity_query.clear();
  CHECK(saying(cautions(hookup, nullptr), Severity::error, "identity") == 0);
}

TEST_CASE("ripple that nothing bounds is named at a dc input of a bench with an ac output, and only there") {
  Hookup hookup = live_bench(Isolation::isolated);
  Stair stair;
  stair.ratings = {385.0, 230.0, 600.0, 50.0, 40.0};
  const std::string_view text = "port \"input\": nothing bounds its ripple power";
  CHECK(saying(cautions(hookup, &stair), Severity::warning, text) == 1);
  CHECK(saying(cautions(hookup, nullptr), Severity::warning, text) == 1);
  // All of the current pulsates at twice the frequency: I = 600 W / 385 V, i^2 = I^2 / 2 = 1.21 A^2.
  CHECK(saying(cautions(hookup, &stair), Severity::warning, "1.21 W for each ohm") == 1);
  Port& input = hookup.ports[1];
  SECTION("an output on DC does not pulsate so") {
    hookup.ports[0].kind = PortKind::dc;
  }
  SECTION("ripple current and source resistance bound it; one alone does not") {
    input.ripple_current_rms_a = 0.05;
    CHECK(saying(cautions(hookup, &stair), Severity::warning, text) == 1);
    input.source_resistance_ohm = 0.05;
  }
  SECTION("a capture of voltage and current measures it") {
    CaptureSource capture;
    capture.port = "input";
    capture.voltage_column = "1";
    hookup.captures.push_back(capture);
    CHECK(saying(cautions(hookup, &stair), Severity::warning, text) == 1);
    hookup.captures[0].current_column = "2";
  }
  SECTION("a wattmeter sees it") {
    input.power = "watts";
  }
  CHECK(saying(cautions(hookup, &stair), Severity::warning, text) == 0);
}

TEST_CASE("a dangerous voltage that nobody declared live is named") {
  Hookup hookup = live_bench(Isolation::isolated);
  Stair stair;
  stair.ratings = {385.0, 230.0, 600.0, 50.0, 40.0};
  CHECK(saying(cautions(hookup, &stair), Severity::warning,
               "port \"input\" is rated 385 V DC but not declared \"live\"") == 1);
  CHECK(saying(cautions(hookup, &stair), Severity::warning, "port \"output\" is rated") == 0);
  stair.ratings.input_voltage_v = 48.0;
  CHECK(saying(cautions(hookup, &stair), Severity::warning, "not declared \"live\"") == 0);
}

TEST_CASE("errors come before warnings, warnings before notes") {
  const auto findings = cautions(live_bench(Isolation::earthed), nullptr);
  CHECK(std::is_sorted(findings.begin(), findings.end(),
                       [](const Finding& a, const Finding& b) { return a.severity < b.severity; }));
  CHECK(findings.front().severity == Severity::error);
  CHECK(findings.back().severity == Severity::note);
}

TEST_CASE("the caution of a prompt fits the bench") {
  CHECK(hand_caution(live_bench(Isolation::isolated)).find("prove dead with a tester") != std::string::npos);
  Hookup tame = live_bench(Isolation::isolated);
  tame.ports[0].live = false;
  CHECK(hand_caution(tame).find("Live parts") == std::string::npos);
}

}  // namespace
}  // namespace loadstair::setup
