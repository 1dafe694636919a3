#include "analysis/limits/tables.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <set>
#include <string>
#include <tuple>

#include "analysis/estimate/estimate.h"

using namespace loadstair;
using limits::Quantity;
using limits::Status;
using limits::Verdict;

namespace {

estimate::Coverage normal(double value, double u) {
  return estimate::coverage(
      estimate::Estimate{value, estimate::make_type_b("x", "x", estimate::Distribution::normal), u});
}

limits::Decision decided(const char* id, Quantity quantity, int order, const estimate::Coverage& result,
                         const limits::Circumstances& circumstances, std::string_view condition = {}) {
  const limits::Table* table = limits::find_table(id);
  REQUIRE(table != nullptr);
  const limits::Row* row = limits::find_row(*table, quantity, order, condition);
  REQUIRE(row != nullptr);
  auto out = limits::decide(*table, *row, result, circumstances);
  REQUIRE(out);
  return *std::move(out);
}

}  // namespace

TEST_CASE("every table has what a person needs to judge it, and no row twice") {
  std::set<std::string_view> ids;
  CHECK(limits::tables().size() >= 12);
  for (const auto& table : limits::tables()) {
    INFO(table.id);
    CHECK(ids.insert(table.id).second);
    CHECK(limits::find_table(table.id) == &table);
    CHECK_FALSE(table.title.empty());
    CHECK_FALSE(table.source.empty());
    CHECK_FALSE(table.applicability.empty());
    CHECK_FALSE(table.simple_acceptance);
    CHECK_FALSE(table.rows.empty());
    std::set<std::tuple<Quantity, int, std::string_view>> seen;
    for (const auto& row : table.rows) {
      CHECK(seen.insert({row.quantity, row.order, row.condition}).second);
      CHECK(row.limit > 0);
      CHECK((row.order > 1) == (row.quantity == Quantity::harmonic));
      CHECK(limits::find_row(table, row.quantity, row.order, row.condition) == &row);
    }
  }
  CHECK(limits::find_table("none of them") == nullptr);
}

TEST_CASE("a confirmed row decides; a short record makes it indicative") {
  // EN 50160, order 5: 6 %.
  limits::Circumstances week;
  week.record_s = 7 * 86400;
  auto found = decided("en50160_low_voltage", Quantity::harmonic, 5, normal(4, 0.5), week);
  CHECK(found.verdict == Verdict::pass);
  CHECK_FALSE(found.indicative);
  CHECK(found.text.find("EN 50160 low voltage, order 5: pass: ") == 0);
  found = decided("en50160_low_voltage", Quantity::harmonic, 5, normal(8, 0.5),
                  {std::nullopt, std::nullopt, 0.2});
  CHECK(found.verdict == Verdict::fail);
  CHECK(found.indicative);
  CHECK(found.text.find("indicative: recorded 0.200 s, the table asks for 7.00 days") != std::string::npos);
}

TEST_CASE("a row from memory decides nothing, a row of one copy says so") {
  limits::Circumstances long_enough;
  long_enough.record_s = 1e7;
  for (const double value : {0.01, 100.0}) {
    const auto found = decided("ieee1547_2018", Quantity::harmonic, 5, normal(value, 0.001), long_enough);
    CHECK(found.verdict == Verdict::undecided);
    CHECK(found.text.find("from memory") != std::string::npos);
  }
  const auto dc = decided("ieee1547_2018", Quantity::dc_injection, 0, normal(0.2, 0.05), long_enough);
  CHECK(dc.verdict == Verdict::pass);
  CHECK(dc.text.find("one copy only") != std::string::npos);
  CHECK(decided("ieee519_voltage", Quantity::total_distortion, 0, normal(9, 0.1), long_enough, "to 1 kV")
            .verdict == Verdict::fail);
  CHECK(decided("ieee519_voltage", Quantity::total_distortion, 0, normal(9, 0.1), long_enough, "above 161 kV")
            .verdict == Verdict::undecided);
}

TEST_CASE("limits that depend on the circumstances need them") {
  const auto& d = *limits::find_table("iec61000_3_2_class_d");
  const auto& row = *limits::find_row(d, Quantity::harmonic, 3);
  limits::Circumstances at_500_w;
  at_500_w.active_power_w = 500;
  at_500_w.record_s = 200;
  const auto allowed = limits::allowed_by(d, row, at_500_w);
  REQUIRE(allowed);
  CHECK(allowed->limit == Approx(1.7));
  CHECK(allowed->unit == "A");
  CHECK(decided("iec61000_3_2_class_d", Quantity::harmonic, 3, normal(1.5, 0.05), at_500_w).verdict ==
        Verdict::pass);
  CHECK(decided("iec61000_3_2_class_d", Quantity::harmonic, 3, normal(1.9, 0.05), at_500_w).verdict ==
        Verdict::fail);
  const auto unknown = limits::decide(d, row, normal(1.5, 0.05), {});
  REQUIRE_FALSE(unknown);
  CHECK(unknown.refusal().text() ==
        "IEC 61000-3-2 class D, order 3: the limit depends on the active input power, and none is known");
  const auto& c = *limits::find_table("iec61000_3_2_class_c");
  CHECK_FALSE(limits::allowed_by(c, *limits::find_row(c, Quantity::harmonic, 3), at_500_w));
  CHECK(limits::allowed_by(c, *limits::find_row(c, Quantity::harmonic, 5), {}));
}

TEST_CASE("simple acceptance only where a table prescribes it") {
  const auto& table = *limits::find_table("iec61000_3_2_class_a");
  const auto& row = *limits::find_row(table, Quantity::harmonic, 3);
  limits::Circumstances record;
  record.record_s = 1000;
  const auto near = normal(2.29, 0.05);
  CHECK(limits::decide(table, row, near, record)->verdict == Verdict::undecided);
  auto prescribing = table;
  prescribing.simple_acceptance = true;
  CHECK(limits::decide(prescribing, row, near, record)->verdict == Verdict::pass);
}
