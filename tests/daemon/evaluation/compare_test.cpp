#include "daemon/evaluation/compare.h"

#include <algorithm>
#include <catch2/catch.hpp>

#include "tests/daemon/evaluation/hand_bench.h"

using namespace loadstair;
using namespace loadstair::evaluation_tests;

namespace {

/// Three levels of the Stoat; `better` is how much more of its input a board delivers, as a ratio.
HandBench stoat_run(std::int64_t run, const std::string& unit, double better, Meter meter = {}) {
  HandBench bench;
  bench.hookup.channels.reserve(16);
  bench.link("input voltage", setup::Quantity::voltage, "V", meter);
  bench.link("input current", setup::Quantity::current, "A", meter);
  bench.link("output voltage", setup::Quantity::voltage, "V", meter);
  bench.link("output current", setup::Quantity::current, "A", meter);
  setup::Port& input = bench.port("input", setup::Direction::input);
  input.voltage = "input voltage";
  input.current = "input current";
  setup::Port& output = bench.port("output", setup::Direction::output);
  output.voltage = "output voltage";
  output.current = "output current";
  bench.run.summary.run = run;
  bench.run.summary.unit = unit;
  bench.run.summary.revision = unit.substr(0, 1);
  bench.run.summary.started_ns = kStart + run;  // runs begin at different instants: their keys hang on it
  for (const double load_w : {60.0, 120.0, 240.0}) {
    const int step = bench.step(base::print_number(load_w / 2.4) + " %", load_w);
    const double efficiency = 0.95 + better;
    bench.read_window("input voltage", step, 48.0);
    bench.read_window("input current", step, load_w / efficiency / 48.0);
    bench.read_window("output voltage", step, 12.0);
    bench.read_window("output current", step, load_w / 12.0);
  }
  return bench;
}

/// A short-term specification of a tenth of the accuracy, on every meter.
void declare_repeatability(HandBench& bench) {
  for (const setup::Channel& channel : bench.hookup.channels) {
    bench.hookup.repeatability_percent[channel.name] = channel.ranges.front().reading_percent / 10;
  }
}

bool has_remark(const evaluation::ComparisonResult& of, const std::string& part) {
  return std::any_of(of.remarks.begin(), of.remarks.end(),
                     [&](const std::string& remark) { return remark.find(part) != std::string::npos; });
}

}  // namespace

// Four meters of +-0.3 % of reading: u(eta) = 0.95 * 2 * 0.3 % / sqrt 3 = 0.33 points. Nothing shared: sqrt 2
// of it, U = 0.91. Default shares: times sqrt 0.2, U = 0.41. Repeatability of a tenth: times 0.1, U = 0.09.
TEST_CASE("0.3 points between two boards are resolved by repeatability, and not across other instruments") {
  const Meter meter{0.3, 0.0, 1000.0, 0.0, 0.0};
  HandBench c003 = stoat_run(1, "C-003", 0.0, meter);
  HandBench d001 = stoat_run(2, "D-001", 0.003, meter);
  const auto by_default = evaluation::compare(c003.evaluate(), d001.evaluate());
  REQUIRE(by_default);
  REQUIRE(by_default->levels.size() == 3);
  for (const auto& level : by_default->levels) {
    INFO(level.text);
    CHECK(level.decision == "not resolved");
    CHECK(level.difference.value == Approx(0.003).epsilon(0.01));
    CHECK(level.difference.expanded.value() == Approx(0.0041).epsilon(0.02));
    CHECK(level.unshared_share == Approx(0.2).epsilon(0.02));
    CHECK(level.flips_at.value() < 0.2);
  }
  declare_repeatability(c003);
  declare_repeatability(d001);
  const auto repeated = evaluation::compare(c003.evaluate(), d001.evaluate());
  REQUIRE(repeated);
  for (const auto& level : repeated->levels) {
    INFO(level.text);
    CHECK(level.decision == "better");
    CHECK(level.difference.expanded.value() == Approx(0.00091).epsilon(0.03));
    CHECK(level.unshared_share == Approx(0.01).epsilon(0.05));
    CHECK(level.flips_at.value() > 0.01);
    CHECK(level.narrowing > 3);
    CHECK(level.loss_difference.value < 0);
    CHECK(level.text.starts_with("unit D-001 against C-003 at "));
  }
  CHECK(has_remark(*repeated, "repeatability was not tested"));
  // As if each meter had been exchanged in between.
  for (setup::Instrument& instrument : d001.hookup.instruments) instrument.serial_number = "another";
  const auto exchanged = evaluation::compare(c003.evaluate(), d001.evaluate());
  REQUIRE(exchanged);
  for (const auto& level : exchanged->levels) {
    INFO(level.text);
    CHECK(level.decision == "not resolved");
    CHECK(level.difference.expanded.value() == Approx(0.0091).epsilon(0.03));
    CHECK(level.unshared_share == Approx(1.0));
  }
  CHECK(has_remark(*exchanged, "input voltage meter: not the same meter"));
}

TEST_CASE("a meter adjusted between two runs counts as unshared") {
  HandBench c003 = stoat_run(1, "C-003", 0.0);
  HandBench d001 = stoat_run(2, "D-001", 0.003);
  c003.hookup.instruments[0].calibrated = "2026-01-10";
  d001.hookup.instruments[0].calibrated = "2026-09-01";
  const auto compared = evaluation::compare(c003.evaluate(), d001.evaluate());
  REQUIRE(compared);
  CHECK(has_remark(*compared, "calibrated 2026-09-01 against 2026-01-10"));
  // One of four meters of equal weight: 0.2 + 0.8 / 4.
  CHECK(compared->levels[0].unshared_share == Approx(0.4).epsilon(0.02));
}

TEST_CASE("a run is not compared with itself, nor without a rated power") {
  HandBench c003 = stoat_run(1, "C-003", 0.0);
  CHECK_FALSE(evaluation::compare(c003.evaluate(), c003.evaluate()));
  HandBench d001 = stoat_run(2, "D-001", 0.003);
  c003.stair.ratings.output_power_w = 0.0;
  const auto compared = evaluation::compare(c003.evaluate(), d001.evaluate());
  REQUIRE_FALSE(compared);
  CHECK(compared.refusal().text().find("rated output power") != std::string::npos);
}
