// Every action's "U if done", against U of the same result measured again as if it had been taken.
#include "analysis/estimate/budget.h"

#include <algorithm>
#include <array>
#include <catch2/catch.hpp>
#include <cmath>
#include <vector>

#include "analysis/estimate/meter.h"
#include "analysis/estimate/sharing.h"
#include "analysis/estimate/tie.h"
#include "analysis/estimate/type_a.h"
#include "tests/analysis/random_source.h"

using namespace loadstair;
using estimate::Estimate;
using estimate::MeterRange;

namespace {

MeterRange meter(const char* name, const char* range, double full_scale, estimate::AccuracySpec spec) {
  return {{name, "dc voltage", range}, full_scale, 0, spec};
}

Estimate read(const MeterRange& range, double value, const char* level) {
  auto out = estimate::with_meter_error(value, range, {"r", level});
  REQUIRE(out);
  return *std::move(out);
}

const estimate::BudgetLine& line(const estimate::Budget& budget, const std::string& name) {
  const auto found = std::find_if(budget.lines.begin(), budget.lines.end(),
                                  [&](const auto& one) { return one.name == name; });
  INFO(name);
  REQUIRE(found != budget.lines.end());
  REQUIRE(found->expanded_if_done);
  return *found;
}

double expanded(const Estimate& a) {
  return estimate::coverage(a).expanded;
}

}  // namespace

TEST_CASE("a tie check's U is that of the same ratio with a tie of this run") {
  const auto a = meter("VA", "60 V", 60, {0.5, 0, 0});
  const auto b = meter("VB", "60 V", 60, {0.8, 0, 0});
  const Estimate in = read(a, 48, "input");
  const Estimate out = read(b, 47, "output");
  const auto before = estimate::budget(out / in);
  const auto& gain = line(before, "VB dc voltage on 60 V: gain");
  CHECK(gain.action == "tie check in this run: VB and VA on one quantity, their ratio measured");
  // Tied at the level of the reading, where the weight of the other level is none.
  const auto tie = estimate::tie_check({read(a, 47, "t1 A"), read(b, 47, "t1 B")},
                                       {read(a, 10, "t2 A"), read(b, 10, "t2 B")});
  REQUIRE(tie);
  CHECK(*gain.expanded_if_done == Approx(expanded(estimate::tied(out, *tie) / in)).epsilon(1e-9));
  CHECK(*gain.expanded_if_done < 0.5 * before.coverage.expanded);
  // Seen from the other meter it is the same tie.
  CHECK(*line(before, "VA dc voltage on 60 V: gain").expanded_if_done ==
        Approx(*gain.expanded_if_done).epsilon(1e-12));
}

TEST_CASE("without a partner on a comparable range a tie needs a better meter") {
  const auto a = meter("VA", "60 V", 60, {0.5, 0, 0});
  const auto b = meter("VB", "600 V", 600, {0.8, 0, 0});
  for (const Estimate& result : {read(a, 48, "s"), read(a, 48, "s") / read(b, 400, "s")}) {
    const auto found = estimate::budget(result);
    const auto& gain = line(found, "VA dc voltage on 60 V: gain");
    CHECK(gain.action == "tie check against a better meter");
    const Estimate without = result.filtered([](const estimate::Source& source) {
      return source.key != estimate::key::meter({"VA", "dc voltage", "60 V"}, "gain");
    });
    CHECK(*gain.expanded_if_done == Approx(expanded(without)).epsilon(1e-12));
  }
  // A sum of two readings gains nothing from the ratio of their meters.
  const auto c = meter("VC", "60 V", 60, {0.8, 0, 0});
  const auto sum = estimate::budget(read(a, 20, "s") + read(c, 20, "t"));
  CHECK(line(sum, "VC dc voltage on 60 V: gain").action == "tie check against a better meter");
}

TEST_CASE("an offset asks for a zero check, whose U is that of the corrected reading") {
  const auto range = meter("VA", "60 V", 60, {0.1, 0.3, 0});
  const Estimate reading = read(range, 40, "s");
  const auto found = estimate::budget(reading);
  const auto& offset = line(found, "VA dc voltage on 60 V: offset");
  CHECK(offset.action == "zero check: inputs shorted, before and after the run");
  // A zero that stays and shows no noise.
  const auto corrected = estimate::zero_corrected(reading, {Estimate{0}, Estimate{0}}, range, {"r", "s"});
  REQUIRE(corrected);
  CHECK(*offset.expanded_if_done == Approx(expanded(*corrected)).epsilon(1e-12));
}

TEST_CASE("another range's U is that of the reading at 80 % of it") {
  const auto range = meter("VA", "60 V", 60, {0, 0.3, 0});
  const auto found = estimate::budget(read(range, 12, "s"));
  const auto& offset = line(found, "VA dc voltage on 60 V: offset");
  CHECK(offset.action == "use a range nearer to the reading");
  const auto better = read(meter("VA", "15 V", 15, {0, 0.3, 0}), 12, "s");
  // Linearity is not counted as shrinking: the figure is on the careful side, and no more than by that.
  CHECK(*offset.expanded_if_done > expanded(better));
  const Estimate split = better.filtered([](const estimate::Source& source) {
    return estimate::meter_part_of(source) == "offset";
  }) + read(range, 12, "s").filtered([](const estimate::Source& source) {
    return estimate::meter_part_of(source) == "linearity";
  });
  CHECK(*offset.expanded_if_done == Approx(expanded(split)).epsilon(1e-12));
}

TEST_CASE("a window four times as long has half the noise and four times the readings") {
  estimate::Source source;
  source.key = estimate::key::window("r", "s", "noise 0");
  source.name = "noise in the window of s";
  source.kind = estimate::Kind::type_a;
  source.degrees_of_freedom = 4;
  source.sample = "window of s";
  source.remedy = estimate::Remedy::longer_window;
  source.variance_left = 0.25;
  const auto found = estimate::budget(Estimate{1, estimate::make_source(source), 0.1});
  // Five readings become twenty: t(19) = 2.093 against t(4) = 2.776 (JCGM 100 table G.2: 2.09, 2.78).
  CHECK(found.coverage.expanded == Approx(0.1 * 2.776445).epsilon(1e-6));
  CHECK(*line(found, "noise in the window of s").expanded_if_done == Approx(0.05 * 2.093024).epsilon(1e-6));
}

TEST_CASE("sensing wires, a capture and a declared tolerance leave what their source says") {
  for (const auto remedy :
       {estimate::Remedy::sensing_wires, estimate::Remedy::capture, estimate::Remedy::declare_tolerance}) {
    estimate::Source source;
    source.key = "component/leads/resistance";
    source.name = "leads";
    source.remedy = remedy;
    source.variance_left = 0.04;
    const Estimate other{0, estimate::make_type_b("o", "o", estimate::Distribution::normal), 0.3};
    const auto found = estimate::budget(Estimate{5, estimate::make_source(source), -0.4} + other);
    CHECK_FALSE(line(found, "leads").action.empty());
    CHECK(*line(found, "leads").expanded_if_done ==
          Approx(1.959963984540054 * std::hypot(0.08, 0.3)).epsilon(1e-12));
  }
}

TEST_CASE("no action is named that would widen the interval") {
  // Nearly all of the error is linearity: a tie would bring in twice of it.
  const auto a = meter("VA", "60 V", 60, {0.5, 0, 0});
  const auto b = meter("VB", "60 V", 60, {0.5, 0, 0});
  const estimate::Shares mostly_level{0.2, 0.1, 0.7};
  const auto in = estimate::with_meter_error(48, a, {"r", "i"}, mostly_level);
  const auto out = estimate::with_meter_error(48, b, {"r", "o"}, mostly_level);
  REQUIRE(in);
  REQUIRE(out);
  for (const auto& one : estimate::budget(*out / *in).lines) {
    CHECK(one.action.empty());
    CHECK_FALSE(one.expanded_if_done);
  }
  // Two readings and a large specification: without the specification k rises from 2.8 to 12.7.
  estimate::Source wires;
  wires.key = "component/leads/resistance";
  wires.name = "leads";
  wires.remedy = estimate::Remedy::sensing_wires;
  wires.variance_left = 0;
  const Estimate noise{0, estimate::make_type_a("n", "noise", 1), 1};
  for (const auto& one : estimate::budget(Estimate{5, estimate::make_source(wires), 1} + noise).lines) {
    CHECK(one.action.empty());
    CHECK_FALSE(one.expanded_if_done);
  }
}
