// Zeros and ties of the bench, and what kinds of steps make.
#include <catch2/catch.hpp>
#include <cmath>

#include "hand_bench.h"

using namespace loadstair;
using namespace loadstair::evaluation;
using namespace loadstair::evaluation_tests;

namespace {

constexpr double kNormal95 = 1.959963984540054;
constexpr double kInputA = 39.9 / 48.0;
constexpr double kOutputA = 38.5 / 12.0;

int kind_step(HandBench& bench, const std::string& label, setup::StepKind kind, std::size_t check = 0) {
  const int step = bench.step(label, kind == setup::StepKind::level ? 40.0 : 0.0);
  bench.stair.steps.back().kind = kind;
  bench.stair.steps.back().check = check;
  return step;
}

void read_all(HandBench& bench, int step, double input_v, double input_a, double output_v, double output_a) {
  bench.read_window("input voltage", step, input_v);
  bench.read_window("input current", step, input_a);
  bench.read_window("output voltage", step, output_v);
  bench.read_window("output current", step, output_a);
}

const BudgetEntry* entry_of(const StepResult& step, const std::string& text) {
  for (const BudgetEntry& entry : step.budget) {
    if (entry.source.find(text) != std::string::npos) return &entry;
  }
  return nullptr;
}

double half_width(const Quantity& quantity) {
  return (quantity.high - quantity.low) / 2.0;
}

bool mentions(const std::vector<std::string>& texts, const std::string& text) {
  for (const std::string& one : texts) {
    if (one.find(text) != std::string::npos) return true;
  }
  return false;
}

}  // namespace

TEST_CASE("only levels make the curve; checks of the bench have no efficiency, idle steps an input power") {
  HandBench bench = stoat_bench();
  for (const auto kind : {setup::StepKind::zero, setup::StepKind::tie, setup::StepKind::no_load,
                          setup::StepKind::standby, setup::StepKind::closure}) {
    const int step = kind_step(bench, std::string{setup::name_of(kind)}, kind);
    if (kind == setup::StepKind::closure) {
      read_all(bench, step, 48.0, kInputA, 12.0, kOutputA);
    } else {
      bench.read_window("input voltage", step, 48.0);
      bench.read_window("input current", step, 0.05);
    }
  }
  const RunResult result = bench.evaluate();
  REQUIRE(result.steps.size() == 6);
  CHECK(result.curve.size() == 1);
  CHECK(result.curve.front().label == "40 W");
  CHECK(result.steps[0].kind == "level");
  for (const std::size_t i : {std::size_t{1}, std::size_t{2}}) {
    CHECK(result.steps[i].result_state == "a check of the bench");
    CHECK_FALSE(result.steps[i].efficiency.known);
    CHECK(result.steps[i].efficiency.why == "a check of the bench");
  }
  // 48 V x 0.05 A, each within 0.5 %.
  for (const std::size_t i : {std::size_t{3}, std::size_t{4}}) {
    INFO(result.steps[i].label);
    REQUIRE(result.steps[i].input_power.known);
    CHECK(result.steps[i].input_power.value == Approx(2.4).epsilon(1e-12));
    CHECK(*result.steps[i].input_power.expanded ==
          Approx(kNormal95 * 2.4 * 0.005 * std::sqrt(2.0 / 3.0)).epsilon(1e-9));
    CHECK_FALSE(result.steps[i].efficiency.known);
    CHECK(result.steps[i].budget.empty());
  }
  CHECK(result.steps[5].kind == "closure");
  CHECK(result.steps[5].efficiency.value == Approx(38.5 / 39.9).epsilon(1e-12));
}

TEST_CASE("a zero is taken off every reading, and half its change takes the offset's place") {
  // Offset limits of 0.1 % of 2 V; nothing else is uncertain.
  HandBench bench = stoat_bench({.reading_percent = 0.0});
  setup::RangeSpec& range = bench.hookup.channels[1].ranges[0];
  range.range_percent = 0.1;
  range.upto = 2.0;
  const auto with_offset = bench.evaluate().steps.at(0);
  CHECK(half_width(with_offset.input_power) ==
        Approx(kNormal95 * 48.0 * 0.002 / std::sqrt(3.0)).epsilon(1e-9));

  bench.stair.zero_channels = {"input current"};
  const int before = kind_step(bench, "zero before", setup::StepKind::zero);
  const int after = kind_step(bench, "zero after", setup::StepKind::zero);
  bench.read_window("input current", before, 0.0010);
  bench.read_window("input current", after, 0.0014);
  const RunResult result = bench.evaluate();
  REQUIRE(result.bench_checks.size() == 1);
  const BenchCheckResult& check = result.bench_checks.front();
  INFO(check.text);
  CHECK(check.applied);
  CHECK(check.kind == "zero");
  CHECK(check.before.value == Approx(0.0010).epsilon(1e-9));
  CHECK(check.after.value == Approx(0.0014).epsilon(1e-9));
  const StepResult& step = result.steps.front();
  CHECK(step.input_power.value == Approx(48.0 * (kInputA - 0.0012)).epsilon(1e-9));
  // Half the change of 0.4 mA, rectangular (JCGM 100 4.3.7), and a tenth of the offset's variance that is new
  // at every level.
  const double drift = 0.0002 / std::sqrt(3.0);
  const double level = std::sqrt(0.1) * 0.002 / std::sqrt(3.0);
  CHECK(half_width(step.input_power) == Approx(kNormal95 * 48.0 * std::hypot(drift, level)).epsilon(1e-6));
  CHECK(entry_of(step, "offset") == nullptr);
}

TEST_CASE("a zero that cannot be one, or was read on another range, is told and not taken off") {
  HandBench bench = stoat_bench();
  bench.stair.zero_channels = {"input current", "input voltage"};
  bench.hookup.channels[1].ranges[0] = {.upto = 2.0, .reading_percent = 0.5};
  // Two ranges of the voltmeter: at zero it sits on the lower one.
  setup::RangeSpec upper = bench.hookup.channels[0].ranges[0];
  bench.hookup.channels[0].ranges = {{.upto = 10.0, .reading_percent = 0.5}, upper};
  const int zero = kind_step(bench, "zero before", setup::StepKind::zero);
  bench.read_window("input current", zero, 0.5);
  bench.read_window("input voltage", zero, 0.001);
  const RunResult result = bench.evaluate();
  REQUIRE(result.bench_checks.size() == 2);
  CHECK_FALSE(result.bench_checks[0].applied);
  CHECK(result.bench_checks[0].text.find("were its inputs shorted") != std::string::npos);
  CHECK(result.steps.front().input_power.value == Approx(39.9).epsilon(1e-12));
  INFO(result.bench_checks[1].text);
  CHECK(result.bench_checks[1].before.value == Approx(0.001).epsilon(1e-9));
  CHECK(result.steps.front().ports.at(0).voltage.value == Approx(48.0).epsilon(1e-12));
}

TEST_CASE("a zero before alone is taken off, and the specified offset stays") {
  HandBench bench = stoat_bench({.reading_percent = 0.0});
  bench.hookup.channels[1].ranges[0].range_percent = 0.1;
  bench.hookup.channels[1].ranges[0].upto = 2.0;
  bench.stair.zero_channels = {"input current"};
  const int before = kind_step(bench, "zero before", setup::StepKind::zero);
  bench.read_window("input current", before, 0.0010);
  const StepResult step = bench.evaluate().steps.front();
  CHECK(step.input_power.value == Approx(48.0 * (kInputA - 0.0010)).epsilon(1e-9));
  CHECK(half_width(step.input_power) == Approx(kNormal95 * 48.0 * 0.002 / std::sqrt(3.0)).epsilon(1e-9));
}

TEST_CASE("a tie puts the other meter right and lets both gains drop out of the efficiency") {
  // Two ammeters of 0.5 %, exact voltmeters; the output's reads 0.3 % more than the input's.
  HandBench bench = stoat_bench({.reading_percent = 0.0});
  bench.hookup.channels[1].ranges[0].reading_percent = 0.5;
  bench.hookup.channels[3].ranges[0].reading_percent = 0.5;
  const int level = kind_step(bench, "other", setup::StepKind::level);
  read_all(bench, level, 48.0, kInputA, 12.0, kOutputA * 1.003);
  bench.stair.ties = {{"ammeters", {"input current", "output current"}}};
  const int low = kind_step(bench, "tie ammeters, low", setup::StepKind::tie);
  const int high = kind_step(bench, "tie ammeters, high", setup::StepKind::tie);
  bench.read_window("input current", low, 1.0);
  bench.read_window("output current", low, 1.003);
  bench.read_window("input current", high, 4.0);
  bench.read_window("output current", high, 4.012);
  const RunResult result = bench.evaluate();
  REQUIRE(result.bench_checks.size() == 1);
  const BenchCheckResult& check = result.bench_checks.front();
  INFO(check.text);
  CHECK(check.applied);
  CHECK(check.ratio.value == Approx(1.003).epsilon(1e-9));
  const StepResult& step = result.steps.at(1);
  CHECK(step.efficiency.value == Approx(38.5 / 39.9).epsilon(1e-9));
  // Closed form: of each gain's variance a tenth is new at every level (linearity); all else cancels. With
  // the tie's levels a1, a2 and the reading r on the line between them, each tie level's linearity enters
  // with the weight of a straight line there, once for either meter.
  const double u = std::sqrt(0.1) * 0.005 / std::sqrt(3.0);
  const double at = kOutputA;
  const double weight_low = (4.0 - at) / 3.0 * 1.0 / at;
  const double weight_high = (at - 1.0) / 3.0 * 4.0 / at;
  const double relative =
      u * std::sqrt(2.0 + 2.0 * weight_low * weight_low + 2.0 * weight_high * weight_high);
  CHECK(half_width(step.efficiency) == Approx(kNormal95 * relative * 38.5 / 39.9).epsilon(0.03));
  const double untied = 0.005 / std::sqrt(3.0) * std::sqrt(2.0);
  CHECK(half_width(step.efficiency) < 0.6 * kNormal95 * untied);
}

TEST_CASE("a tie of one level, or of meters without accuracy, is not used and says why") {
  HandBench bench = stoat_bench();
  bench.stair.ties = {{"ammeters", {"input current", "output current"}}};
  const int low = kind_step(bench, "tie ammeters, low", setup::StepKind::tie);
  bench.read_window("input current", low, 1.0);
  bench.read_window("output current", low, 1.003);
  RunResult result = bench.evaluate();
  REQUIRE(result.bench_checks.size() == 1);
  CHECK_FALSE(result.bench_checks[0].applied);
  CHECK(result.bench_checks[0].text.find("two levels") != std::string::npos);
  CHECK(result.steps.front().efficiency.value == Approx(38.5 / 39.9).epsilon(1e-12));
  bench.hookup.channels[3].ranges.clear();
  result = bench.evaluate();
  CHECK(result.bench_checks.at(0).text.find("uncertainty not known") != std::string::npos);
}

TEST_CASE("a tie made on another range is not used, and the step says so") {
  HandBench bench = stoat_bench();
  setup::RangeSpec upper = bench.hookup.channels[3].ranges[0];
  bench.hookup.channels[3].ranges = {{.upto = 2.0, .reading_percent = 0.5}, upper};
  bench.stair.ties = {{"ammeters", {"input current", "output current"}}};
  for (const double amps : {0.5, 1.5}) {
    const int step = kind_step(bench, "tie " + base::print_number(amps), setup::StepKind::tie);
    bench.read_window("input current", step, amps);
    bench.read_window("output current", step, amps * 1.01);
  }
  const RunResult result = bench.evaluate();
  CHECK(result.bench_checks.at(0).applied);
  CHECK(mentions(result.steps.front().remarks, "the tie is not used here"));
  CHECK(result.steps.front().efficiency.value == Approx(38.5 / 39.9).epsilon(1e-12));
}
