// every_key.hookup.json and every_key.stair.json hold every key, each with a figure of its own: what is read
// must stand in the right place, in the unit that its key names.
#include <catch2/catch.hpp>
#include <fstream>
#include <functional>
#include <iterator>
#include <set>
#include <string>

#include "daemon/setup/explain.h"
#include "daemon/setup/forms.h"

namespace loadstair::setup {
namespace {

const std::string kFolder = LOADSTAIR_SOURCE "/tests/daemon/setup/";

Hookup bench() {
  auto read = load_hookup(kFolder + "every_key.hookup.json");
  if (!read) FAIL(read.refusal().text());
  return *std::move(read);
}

Stair plan() {
  auto read = load_stair(kFolder + "every_key.stair.json");
  if (!read) FAIL(read.refusal().text());
  return *std::move(read);
}

bool says(const std::vector<std::string>& lines, const std::string& text) {
  return std::any_of(lines.begin(), lines.end(),
                     [&](const std::string& line) { return line.find(text) != std::string::npos; });
}

std::size_t saying(const std::vector<Finding>& findings, Severity severity, std::string_view text) {
  return static_cast<std::size_t>(
      std::count_if(findings.begin(), findings.end(), [&](const Finding& finding) {
        return finding.severity == severity && finding.text.find(text) != std::string::npos;
      }));
}

void collect_keys(const document::Value& value, std::set<std::string>& keys) {
  for (const auto& item : value.items) collect_keys(item, keys);
  for (const auto& member : value.members) {
    keys.insert(member.name);
    collect_keys(member.value, keys);
  }
}

TEST_CASE("the two files hold every key of the checks, limits, conditions, sensors and captures") {
  std::set<std::string> written;
  for (const auto* name : {"every_key.hookup.json", "every_key.stair.json"}) {
    std::ifstream file{kFolder + name, std::ios::binary};
    const std::string text{std::istreambuf_iterator<char>{file}, std::istreambuf_iterator<char>{}};
    const auto document = document::parse(text, name);
    REQUIRE(document);
    collect_keys(*document, written);
  }
  for (const auto* form :
       {&kConditionsForm, &kPlatinumForm, &kThermistorForm, &kOverloadForm, &kChecksForm, &kZeroForm,
        &kTieForm, &kTieLevelForm, &kIdleForm, &kClosureForm, &kLimitForm, &kDecisionForm}) {
    for (const auto key : form->keys) {
      INFO(form->name << ": " << key);
      CHECK(written.count(std::string{key}) == 1);
    }
  }
}

TEST_CASE("conditions, phase error and meter of a channel are read, and absent where not written") {
  const Hookup hookup = bench();
  const Channel& volts = *hookup.find_channel("input voltage");
  CHECK(volts.meter == "hand meter 1");
  CHECK(volts.conditions.low_c == 18.0);
  CHECK(volts.conditions.high_c == 28.0);
  CHECK(volts.conditions.percent_of_spec_per_k == 10.0);
  CHECK(volts.conditions.days == 365.0);
  CHECK_FALSE(volts.conditions.least_percent_of_range);
  CHECK_FALSE(volts.phase_error_deg);
  const Channel& watts = *hookup.find_channel("output power");
  CHECK(watts.meter.empty());
  CHECK(watts.phase_error_deg == 0.05);
  CHECK(watts.band_hz == 1000.0);
  CHECK(watts.conditions.least_percent_of_range == 5.0);
  CHECK(watts.conditions.least_hz == 45.0);
  CHECK(watts.conditions.least_power_factor == 0.1);
  CHECK_FALSE(watts.conditions.low_c);
}

TEST_CASE("sensors that are read as resistance, and a shunt's ambient, are read") {
  const Hookup hookup = bench();
  const Shunt shunt = hookup.find_channel("input current")->conversion.shunt.value();
  CHECK(shunt.ambient_c == 35.0);
  CHECK(shunt.ambient_tolerance_k == 4.0);
  const Platinum platinum = hookup.find_channel("heatsink")->conversion.platinum.value();
  CHECK(platinum.r0_ohm == 1000.0);
  CHECK(platinum.tolerance_class == "AA");
  CHECK_FALSE(platinum.film);
  CHECK(platinum.lead_ohm == 0.4);
  const Thermistor by_beta = hookup.find_channel("inductor")->conversion.thermistor.value();
  CHECK(by_beta.r25_ohm == 10000.0);
  CHECK(by_beta.beta_k == 3950.0);
  CHECK(by_beta.tolerance_k == 1.5);
  const Thermistor by_three = hookup.find_channel("ambient")->conversion.thermistor.value();
  CHECK(by_three.r25_ohm == 0.0);
  CHECK(by_three.a == 1.1e-3);
  CHECK(by_three.b == 2.3e-4);
  CHECK(by_three.c == 9e-8);
  CHECK_FALSE(by_three.tolerance_k);
}

TEST_CASE("the errors of a capture's columns are read") {
  const CaptureSource capture = bench().captures.at(0);
  CHECK(capture.voltage_offset_v == 0.4);
  CHECK(capture.current_offset_a == 0.05);
  CHECK(capture.voltage_bandwidth_hz == 75e6);
  CHECK(capture.current_bandwidth_hz == 100e3);
  CHECK(capture.voltage_linearity_percent == 0.6);
  CHECK(capture.current_linearity_percent == 0.7);
  CHECK(capture.current_delay_s == 35e-9);
  CHECK(capture.delay_tolerance_s == 8e-9);
  CHECK(capture.deskewed == "2026-05-02");
  CHECK(capture.phase_tolerance_deg == 0.9);
  CHECK(capture.timebase_ppm == 25.0);
  CHECK(capture.crest_band_hz == 20e3);
}

TEST_CASE("ratings, overload circuit, limits and decision rule are read") {
  const Stair stair = plan();
  CHECK(stair.ratings.expected_efficiency_percent == 96.5);
  const Overload overload = stair.overload.value();
  CHECK(overload.sense == "rms");
  CHECK(overload.threshold_v == 0.5);
  CHECK(overload.sense_ohm == 0.15);
  CHECK(overload.threshold_tolerance_percent == 4.0);
  CHECK(overload.sense_tolerance_percent == 1.0);
  CHECK(stair.guard_factor == 0.8);
  REQUIRE(stair.limits.size() == 3);
  CHECK(stair.limits[0].quantity == "efficiency");
  CHECK(stair.limits[0].low == 96.0);
  CHECK_FALSE(stair.limits[0].high);
  CHECK(stair.limits[0].unit == "%");
  CHECK(stair.limits[0].at == std::vector<std::string>{"100 %"});
  CHECK(stair.limits[1].unit == "degC");  // written as a sign and C
  CHECK(stair.limits[1].high == 90.0);
  CHECK(stair.limits[2].table == "en50160_low_voltage");
  CHECK(stair.limits[2].quantity.empty());
}

TEST_CASE("both files fit, and every step's place is there") {
  const Stair stair = plan();
  const auto matched = match(stair, bench());
  INFO((matched ? "" : matched.refusal().text()));
  CHECK(matched.ok());
  const auto document = document::parse(stair.text, "f");
  REQUIRE(document);
  for (const Step& step : stair.steps) {
    INFO(step.label << " at " << step.written_at);
    CHECK(document::find(*document, step.written_at) != nullptr);
  }
}

TEST_CASE("the bench is explained with units, sensors and conditions") {
  const auto lines = explain(bench());
  for (const auto* text :
       {"channel input voltage: voltage in V, typed by a person from hand meter 1; ranges up to 600 V; "
        "accuracy "
        "holds from 18 to 28 degC (10 % of it more for each K beyond), for 365 days",
        "ranges up to 60, 600 V", "through a shunt of 0.1 ohm; ranges up to 0.2 V",
        "phase error within 0.05 degrees; ranges up to 1200 W; accuracy holds from 5 % of a range, from 45 "
        "to "
        "1000 Hz, from a power factor of 0.1, up to a crest factor of 3",
        "platinum of 1000 ohm at 0 degC, class AA, wire-wound, two wires of 0.4 ohm together",
        "thermistor of 10000 ohm at 25 degC, beta 3950 K within 1.5 K",
        "thermistor by Steinhart and Hart's coefficients, tolerance not declared",
        "capture of port output by scope: voltage in column CH1, current in column CH2, the current 3.5e-08 "
        "s late, "
        "deskewed on 2026-05-02"}) {
    INFO(text);
    CHECK(says(lines, text));
  }
}

TEST_CASE("the stair is explained step by step, with units where the bench says them") {
  const Hookup hookup = bench();
  const auto lines = explain(plan(), &hookup);
  for (const auto* text :
       {"unit C-003: 12 steps, expected efficiency 96.5 %",
        "zero before: with everything off and discharged, by hand: Short the inputs; everything off; soak 11 "
        "s, "
        "average 12 s, capture",
        "tie voltmeters, low: with everything off and discharged, by hand: Connect the meters again. Connect "
        "both "
        "voltmeters in parallel; only source on, source voltage 100 V; soak 13 s, average 14 s",
        "no load: all but loads on, by hand: Switch the converter on; soak 17 s, settle at most 300 s",
        "50 %: 300 W, load power 300 W; soak 0 s",
        "zeros are measured and taken off: input voltage, input current",
        "tie voltmeters: spare voltage against input voltage at 2 levels",
        "5 % again is compared with 5 %: the drift of the bench within the run",
        // 0.5 V over 0.15 ohm.
        "overload circuit: expected to trip at 3.33333 A rms",
        "limit efficiency at full load: efficiency at least 96 %, at 100 %",
        "limit heatsink in summer: hot heatsink at most 90 degC",
        "limit harmonics: table en50160_low_voltage", "guard band of 0.8 times the expanded uncertainty"}) {
    INFO(text);
    CHECK(says(lines, text));
  }
  CHECK(says(explain(plan()), "load power 300; soak"));
  Stair simple = plan();
  simple.guard_factor = 0.0;
  CHECK(says(explain(simple), "simple acceptance"));
}

TEST_CASE("cautions of checks name what is dangerous, and what they cannot tell") {
  const Hookup hookup = bench();
  const auto full = cautions(hookup, [] {
    static const Stair stair = plan();
    return &stair;
  }());
  CHECK(saying(full, Severity::note, "in series or in parallel with the power off only") == 1);
  CHECK(saying(full, Severity::note, "still wired for it: connect it again before") == 1);
  CHECK(saying(full, Severity::note, "channel \"input voltage\" is typed in a check of the bench") == 1);
  CHECK(saying(full, Severity::note, "some steps are done by hand") == 1);
  CHECK(saying(full, Severity::note, "closure") == 0);
  CHECK(saying(full, Severity::note, "repeatability") == 0);
  CHECK(saying(full, Severity::warning, "has one level") == 0);
  CHECK(saying(full, Severity::warning, "undecided") == 0);
  CHECK(saying(full, Severity::note, "holds for 365 days, but no date of calibration") == 1);
  CHECK(
      saying(full, Severity::warning,
             "\"input voltage\": the ambient of 31 degC is above 28 degC, beyond which its accuracy does not "
             "hold as declared; its uncertainty grows") == 1);

  Stair less = plan();
  std::erase_if(less.steps, [](const Step& step) {
    return step.label == "tie voltmeters, high" || step.label == "5 % again" || step.label == "zero after" ||
           step.kind == StepKind::no_load;
  });
  less.limits = {{"summer", "hot heatsink", "degC", {}, 90.0, {}, ""},
                 {"idle", "no_load", "W", {}, 10.0, {}, ""},
                 {"shape", "thd_voltage", "%", {}, 5.0, {}, ""}};
  less.ambient_c = 15.0;
  Hookup blind = hookup;
  blind.captures.clear();
  blind.temperatures[0].ambient_channel.clear();
  const auto worse = cautions(blind, &less);
  CHECK(saying(worse, Severity::warning, "tie \"voltmeters\" has one level") == 1);
  CHECK(saying(worse, Severity::note, "closure does not end with the first level, \"5 %\"") == 1);
  CHECK(saying(worse, Severity::note, "no zero check at the end") == 1);
  CHECK(saying(worse, Severity::warning, "limit \"summer\" will stay undecided: the temperature") == 1);
  CHECK(saying(worse, Severity::warning, "limit \"idle\" will stay undecided: the stair has no check") == 1);
  CHECK(saying(worse, Severity::warning,
               "limit \"shape\" will stay undecided: thd_voltage comes from a capture") == 1);
  CHECK(saying(worse, Severity::warning, "the ambient of 15 degC is below 18 degC") == 1);
}

TEST_CASE("what is not checked is said: no closure, shares supposed, nobody who takes the load off") {
  Stair stair = plan();
  stair.ties.clear();
  std::erase_if(stair.steps, [](const Step& step) {
    return step.kind == StepKind::closure || step.kind == StepKind::tie;
  });
  for (Step& step : stair.steps) {
    step.prompt.clear();
    step.on.clear();
  }
  Hookup hookup = bench();
  CHECK(saying(cautions(hookup, &stair), Severity::note, "no closure check") == 1);
  CHECK(saying(cautions(hookup, &stair), Severity::note, "80 % are supposed to be the same in every run") ==
        1);
  CHECK(saying(cautions(hookup, &stair), Severity::warning, "switch the converter off; add one") == 1);
  CHECK(saying(cautions(hookup, &stair), Severity::warning, "\"no load\": the hook-up has no load") == 0);
  hookup.repeatability_percent["output power"] = 0.02;
  hookup.controls.pop_back();
  CHECK(saying(cautions(hookup, &stair), Severity::note, "80 % are supposed") == 0);
  CHECK(saying(cautions(hookup, &stair), Severity::warning, "\"no load\": the hook-up has no load") == 1);
  // A stair that comes down again closes by itself.
  stair.steps.push_back(*std::find_if(stair.steps.begin(), stair.steps.end(),
                                      [](const Step& step) { return step.label == "5 %"; }));
  CHECK(saying(cautions(hookup, &stair), Severity::note, "no closure check") == 0);
}

}  // namespace
}  // namespace loadstair::setup
