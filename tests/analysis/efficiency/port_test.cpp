#include "analysis/efficiency/port.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <complex>

#include "analysis/estimate/coverage.h"

using namespace loadstair;
using efficiency::Current;
using efficiency::Port;
using efficiency::PortReading;
using efficiency::Role;
using efficiency::Sensing;
using efficiency::VoltmeterPosition;
using estimate::Estimate;

namespace {

constexpr double kAmmeterOhm = 0.2;
constexpr double kVoltmeterOhm = 5000;
constexpr double kLeadOhm = 0.01;

using Phasor = std::complex<double>;

struct Shown {
  Phasor voltage;
  Phasor current;
};

/// What the meters show, by Kirchhoff's laws, when the converter's terminals carry this voltage and current
/// (out of it at an output, into it at an input). The leads lie between the terminals and everything else.
Shown shown_by_meters(Role role, VoltmeterPosition position, Phasor voltage, Phasor current,
                      double lead_ohm) {
  const double towards_source = role == Role::input ? 1 : -1;
  const Phasor beyond_leads = voltage + towards_source * current * lead_ohm;
  if (position == VoltmeterPosition::converter_side) {
    return {beyond_leads, current + towards_source * beyond_leads / kVoltmeterOhm};
  }
  return {beyond_leads + towards_source * current * kAmmeterOhm, current};
}

Port port_at(Role role, Current current, VoltmeterPosition position) {
  Port port;
  port.name = role == Role::input ? "input" : "output";
  port.role = role;
  port.current = current;
  port.voltmeter = position;
  port.sensing = Sensing::not_at_terminals;
  port.ammeter = efficiency::Resistance{"A1 on 10 A", kAmmeterOhm, 0.05};
  port.voltmeter_impedance = efficiency::Resistance{"V1", kVoltmeterOhm, 0.01};
  port.lead = efficiency::Resistance{"leads of " + port.name, kLeadOhm, std::nullopt};
  return port;
}

}  // namespace

TEST_CASE("the four positions give back the power at the terminals, on DC and on AC with any phase") {
  for (const Role role : {Role::input, Role::output}) {
    for (const auto position : {VoltmeterPosition::converter_side, VoltmeterPosition::outer_side}) {
      for (const double degrees : {0.0, 25.0, -70.0}) {
        const bool dc = degrees == 0;
        INFO((role == Role::input ? "input" : "output")
             << (position == VoltmeterPosition::outer_side ? ", outer side, " : ", converter side, ")
             << degrees);
        const Phasor voltage = 48;
        const Phasor current = std::polar(5.0, degrees * M_PI / 180);
        const Shown shown = shown_by_meters(role, position, voltage, current, kLeadOhm);
        PortReading reading;
        reading.voltage = Estimate{std::abs(shown.voltage)};
        reading.current = Estimate{std::abs(shown.current)};
        if (!dc) reading.power = Estimate{(shown.voltage * std::conj(shown.current)).real()};
        const auto port = port_at(role, dc ? Current::dc : Current::ac, position);
        const auto found = efficiency::port_power(port, reading);
        REQUIRE(found.active_power);
        const double power = (voltage * std::conj(current)).real();
        CHECK(found.active_power->value() == Approx(power).epsilon(1e-12));
        REQUIRE(found.voltage);
        REQUIRE(found.current);
        CHECK(found.voltage->value() == Approx(std::abs(voltage)).epsilon(1e-12));
        CHECK(found.current->value() == Approx(std::abs(current)).epsilon(1e-12));
        if (!dc) {
          REQUIRE(found.power_factor);
          CHECK(found.power_factor->value() == Approx(std::cos(degrees * M_PI / 180)).epsilon(1e-12));
        }
        REQUIRE(found.correction);
        const double uncorrected = (shown.voltage * std::conj(shown.current)).real();
        CHECK(found.correction->value() == Approx(power - uncorrected).epsilon(1e-9));
        CHECK(found.correction_texts.size() == 2);
      }
    }
  }
}

TEST_CASE("an undeclared tolerance is 30 %, rectangular, and says what would help") {
  const auto undeclared = efficiency::resistance_estimate({"leads", 0.01, std::nullopt});
  CHECK(undeclared.standard_uncertainty() == Approx(0.003 / std::sqrt(3)).epsilon(1e-12));
  const auto declared = efficiency::resistance_estimate({"leads", 0.01, 0.02});
  CHECK(declared.standard_uncertainty() == Approx(0.0002 / std::sqrt(3)).epsilon(1e-12));
  CHECK(undeclared.terms()[0].source->remedy == estimate::Remedy::declare_tolerance);
  // 20 A through 10 milliohm: 4 W, and 30 % of them are in doubt.
  Port port = port_at(Role::output, Current::dc, VoltmeterPosition::converter_side);
  port.voltmeter_impedance.reset();
  PortReading reading;
  reading.voltage = Estimate{12};
  reading.current = Estimate{20};
  const auto found = efficiency::port_power(port, reading);
  REQUIRE(found.active_power);
  CHECK(found.active_power->value() == Approx(244).epsilon(1e-12));
  CHECK(found.active_power->standard_uncertainty() == Approx(1.2 / std::sqrt(3)).epsilon(1e-12));
  CHECK(found.correction_texts == std::vector<std::string>{"drop of the leads +4.00 W"});
}

TEST_CASE("volts times amps of an AC port are not watts") {
  Port port;
  port.name = "output";
  port.role = Role::output;
  port.current = Current::ac;
  PortReading reading;
  reading.voltage = Estimate{230};
  reading.current = Estimate{2};
  const auto apparent = efficiency::port_power(port, reading);
  CHECK(apparent.state == efficiency::PowerState::apparent_only);
  CHECK(apparent.state_text == "apparent power only");
  CHECK_FALSE(apparent.active_power);
  REQUIRE(apparent.apparent_power);
  CHECK(apparent.apparent_power->value() == 460);

  // A power factor declared as [0.9, 1] is a rectangular one.
  reading.power_factor =
      estimate::bounded(0.9, 1, estimate::make_type_b("pf", "pf", estimate::Distribution::rectangular));
  const auto declared = efficiency::port_power(port, reading);
  CHECK(declared.method == "V x I x PF");
  REQUIRE(declared.active_power);
  CHECK(declared.active_power->value() == Approx(437).epsilon(1e-14));
  CHECK(declared.active_power->standard_uncertainty() == Approx(23 / std::sqrt(3)).epsilon(1e-12));

  reading.capture_power = Estimate{440};
  CHECK(efficiency::port_power(port, reading).method == "capture");
  reading.power = Estimate{441};
  CHECK(efficiency::port_power(port, reading).method == "wattmeter");
}

TEST_CASE("a wattmeter that has no value leaves apparent power only, and says which channel is gone") {
  Port port;
  port.name = "output";
  port.current = Current::ac;
  PortReading reading;
  reading.voltage = Estimate{230};
  reading.current = Estimate{2};
  reading.power = estimate::Quoted{base::Refusal{"output power", "no good reading in the window"}};
  const auto found = efficiency::port_power(port, reading);
  CHECK(found.state == efficiency::PowerState::apparent_only);
  CHECK(found.active_power.refusal().reason ==
        "apparent power only; missing channel output power: no good reading in the window");
}

TEST_CASE("a missing channel is named, a channel that was never declared too") {
  Port port;
  port.name = "input";
  PortReading reading;
  reading.voltage = estimate::Quoted{base::Refusal{"input voltage", "no good reading in the window"}};
  reading.current = Estimate{1};
  const auto found = efficiency::port_power(port, reading);
  CHECK(found.state == efficiency::PowerState::missing);
  CHECK(found.state_text == "missing channel input voltage: no good reading in the window");
  CHECK_FALSE(found.active_power);
  CHECK(found.current);
  reading.voltage.reset();
  CHECK(efficiency::port_power(port, reading).state_text == "no voltage channel at input");
  CHECK(efficiency::port_power(port, {}).state_text == "no channel measures input");
}

TEST_CASE("a port given two ways is cross-checked against the interval of the difference") {
  const auto own = [](const char* key, double value, double u) {
    return Estimate{value, estimate::make_type_b(key, key, estimate::Distribution::normal), u};
  };
  Port port;
  port.name = "output";
  port.current = Current::ac;
  PortReading reading;
  reading.power = own("W", 400, 0.5);
  reading.capture_power = own("capture", 402, 1);
  const auto near = efficiency::port_power(port, reading);
  CHECK(near.remarks.empty());
  REQUIRE(near.cross_checks.size() == 1);
  CHECK(near.cross_checks[0].agrees);
  CHECK(near.cross_checks[0].text.find("they agree within the 2.2 W") != std::string::npos);
  // Root of 0.5^2 + 1^2, by the normal 95 % factor of JCGM 100:2008 table G.2.
  CHECK(near.cross_checks[0].allowed == Approx(1.959964 * std::sqrt(1.25)).epsilon(1e-6));
  reading.capture_power = own("capture", 404, 1);
  const auto found = efficiency::port_power(port, reading);
  REQUIRE(found.remarks.size() == 1);
  CHECK(found.remarks[0].find("wattmeter gives 400.00 W, capture 404.00 W") == 0);
  REQUIRE(found.cross_checks.size() == 1);
  CHECK_FALSE(found.cross_checks[0].agrees);
  CHECK(found.cross_checks[0].used == "wattmeter");
  CHECK(found.cross_checks[0].other == "capture");
  CHECK(found.cross_checks[0].difference.value() == Approx(4));
}

TEST_CASE("undeclared leads are spoken of where they matter") {
  // 5 milliohm at 20 A is 2 W of 240 W (R I squared); 10 milliohm would be 4 W.
  const auto five = efficiency::lead_effect(12, 20, 0.005);
  CHECK(five.power_w == Approx(2).epsilon(1e-14));
  CHECK(five.matters);
  Port port;
  port.name = "output";
  const auto remark = efficiency::lead_remark(port, 12, 20);
  REQUIRE(remark);
  CHECK(*remark ==
        "output: sensing is not declared, and 10 milliohm of lead would move its power by 4.00 W (1.7 %) at "
        "20.0 A; "
        "sense at the terminals by separate wires, or declare the lead resistance");
  CHECK_FALSE(efficiency::lead_remark(port, 385, 1.6));  // 0.004 %
  port.sensing = Sensing::at_terminals;
  CHECK_FALSE(efficiency::lead_remark(port, 12, 20));
  port.sensing = Sensing::undeclared;
  port.lead = efficiency::Resistance{"leads", 0.005, std::nullopt};
  CHECK_FALSE(efficiency::lead_remark(port, 12, 20));
  CHECK(efficiency::lead_effect(0, 20).matters);
  CHECK_FALSE(efficiency::lead_effect(0, 0).matters);
}

TEST_CASE("one ammeter at two ports is one resistance, and nonsense is set aside") {
  Port port = port_at(Role::input, Current::dc, VoltmeterPosition::outer_side);
  PortReading reading;
  reading.voltage = Estimate{48};
  reading.current = Estimate{5};
  const auto in = efficiency::port_power(port, reading);
  port.role = Role::output;
  port.lead.reset();
  const auto out = efficiency::port_power(port, reading);
  REQUIRE(in.active_power);
  REQUIRE(out.active_power);
  CHECK(estimate::covariance(*in.active_power, *out.active_power) <
        0);  // drops subtract at one, add at the other
  port.ammeter->ohm = -1;
  const auto odd = efficiency::port_power(port, reading);
  CHECK_FALSE(odd.correction);
  REQUIRE(odd.remarks.size() == 1);
  CHECK(odd.remarks[0].find("-1 ohm") != std::string::npos);
  port.ammeter->ohm = 0;
  CHECK(efficiency::port_power(port, reading).remarks.empty());
}

TEST_CASE("ripple power is added to the product of DC means") {
  Port port;
  port.name = "input";
  PortReading reading;
  reading.voltage = Estimate{385};
  reading.current = Estimate{1};
  reading.ripple_power = Estimate{-0.4};
  const auto found = efficiency::port_power(port, reading);
  REQUIRE(found.active_power);
  CHECK(found.active_power->value() == Approx(384.6).epsilon(1e-14));
}

TEST_CASE("ripple behind a source resistance takes power, between none and all of R i^2") {
  // v = -R i for a ripple of i: mean(v i) = -R i_rms^2, closed form; smoothing can only make it less.
  Port port;
  port.name = "input";
  const Estimate ripple = *efficiency::ripple_bound(port, 1.5, 0.4, "1");
  CHECK(ripple.value() == Approx(-0.45).epsilon(1e-14));
  CHECK(ripple.standard_uncertainty() == Approx(0.45 / std::sqrt(3)).epsilon(1e-12));
  CHECK(ripple.terms()[0].source->remedy == estimate::Remedy::capture);
}

TEST_CASE("ripple at an output has either sign, as the load is: nothing is corrected") {
  // |mean(v i)| <= V_rms I_rms (Cauchy and Schwarz) with V_rms = R I_rms: 0.9 W either way.
  Port port;
  port.name = "output";
  for (const auto role : {efficiency::Role::output, efficiency::Role::auxiliary_output}) {
    port.role = role;
    const Estimate ripple = *efficiency::ripple_bound(port, 1.5, 0.4, "1");
    CHECK(ripple.value() == 0.0);
    CHECK(ripple.standard_uncertainty() == Approx(0.9 / std::sqrt(3)).epsilon(1e-12));
  }
}

TEST_CASE("an average-responding meter is put right by the form factor") {
  // A square wave of 10 V: the meter shows 10 * 1.1107, its form factor is 1; a sine stays as it is.
  CHECK(efficiency::rms_from_average_responding(Estimate{11.107207345395915}, Estimate{1})->value() ==
        Approx(10).epsilon(1e-14));
  CHECK(efficiency::rms_from_average_responding(Estimate{10}, Estimate{M_PI / std::sqrt(8)})->value() ==
        Approx(10).epsilon(1e-14));
}
