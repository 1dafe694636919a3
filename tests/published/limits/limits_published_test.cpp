// Published limit tables against the arrays of the program.
#include <catch2/catch.hpp>
#include <cmath>
#include <string>

#include "analysis/limits/tables.h"
#include "tests/published/table.h"

using namespace loadstair;
using limits::Quantity;
using limits::Status;

namespace {

const limits::Table& table(const char* id) {
  const limits::Table* found = limits::find_table(id);
  INFO(id);
  REQUIRE(found != nullptr);
  return *found;
}

const limits::Row& row(const char* id, Quantity quantity, int order, std::string_view condition = {}) {
  const limits::Row* found = limits::find_row(table(id), quantity, order, condition);
  INFO(id << " order " << order);
  REQUIRE(found != nullptr);
  return *found;
}

/// A copy's column against an array; an empty field has no row. Printed to six digits.
void compare(const published::Row& copy, const std::string& column, const char* id, std::size_t& met) {
  const int order = static_cast<int>(published::number(copy, "harmonic"));
  const limits::Row* found = limits::find_row(table(id), Quantity::harmonic, order);
  INFO(id << " order " << order);
  CHECK((found != nullptr) == !copy.at(column).empty());
  if (found == nullptr || copy.at(column).empty()) return;
  CHECK(found->limit == Approx(published::number(copy, column)).epsilon(5e-6));
  ++met;
}

}  // namespace

TEST_CASE("IEC 61000-3-2: every row of classes A to D") {
  std::size_t a = 0;
  std::size_t b = 0;
  std::size_t c = 0;
  std::size_t d = 0;
  for (const auto& copy : published::read_table("limits/iec61000_3_2.csv")) {
    compare(copy, "class_a_a", "iec61000_3_2_class_a", a);
    compare(copy, "class_b_a", "iec61000_3_2_class_b", b);
    compare(copy, "class_c_percent", "iec61000_3_2_class_c", c);
    compare(copy, "class_d_ma_per_w", "iec61000_3_2_class_d", d);
    // Class B is one and a half times class A.
    const int order = static_cast<int>(published::number(copy, "harmonic"));
    CHECK(row("iec61000_3_2_class_b", Quantity::harmonic, order).limit ==
          Approx(1.5 * row("iec61000_3_2_class_a", Quantity::harmonic, order).limit).epsilon(1e-9));
    if (copy.at("class_d_most_a").empty()) continue;
    const auto most = limits::class_d_limit_a(order, 1e6);
    REQUIRE(most);
    CHECK(*most == Approx(published::number(copy, "class_d_most_a")).epsilon(5e-6));
  }
  CHECK(a == table("iec61000_3_2_class_a").rows.size());
  CHECK(b == table("iec61000_3_2_class_b").rows.size());
  CHECK(c == table("iec61000_3_2_class_c").rows.size());
  CHECK(d == table("iec61000_3_2_class_d").rows.size());
}

TEST_CASE("IEC 61000-3-2 class D: 500 W has 1.70 A at order 3, 1000 W the 2.30 A of class A") {
  const auto at = [](int order, double watts) {
    const auto found = limits::class_d_limit_a(order, watts);
    REQUIRE(found);
    return *found;
  };
  CHECK(at(3, 500) == Approx(1.70).epsilon(1e-12));
  CHECK(at(3, 1000) == Approx(2.30).epsilon(1e-12));
  CHECK(at(39, 100) == Approx(100 * 3.85e-3 / 39).epsilon(1e-8));
  CHECK_FALSE(limits::class_d_limit_a(2, 500));
  CHECK_FALSE(limits::class_d_limit_a(41, 500));
  CHECK_FALSE(limits::class_d_limit_a(3, 0));
  CHECK_FALSE(limits::class_d_limit_a(3, std::nan("")));
}

TEST_CASE("IEC 61000-3-2 class C: order 3 is 30 times the power factor, the others are fixed") {
  const auto third = limits::class_c_limit_percent(3, 0.9);
  REQUIRE(third);
  CHECK(*third == Approx(27).epsilon(1e-12));
  const auto fifth = limits::class_c_limit_percent(5, 0.9);
  REQUIRE(fifth);
  CHECK(*fifth == 10);
  CHECK_FALSE(limits::class_c_limit_percent(3, 1.1));
  CHECK_FALSE(limits::class_c_limit_percent(3, 0));
  CHECK_FALSE(limits::class_c_limit_percent(4, 0.9));
}

TEST_CASE("EN 50160 and IEC 61000-2-2: every order and the total") {
  std::size_t met = 0;
  for (const auto& copy : published::read_table("limits/en50160.csv")) {
    compare(copy, "percent", "en50160_low_voltage", met);
  }
  CHECK(met + 1 == table("en50160_low_voltage").rows.size());
  CHECK(row("en50160_low_voltage", Quantity::total_distortion, 0).limit == 8);
  CHECK(table("en50160_low_voltage").observation_s == 7 * 86400);
  met = 0;
  for (const auto& copy : published::read_table("limits/iec61000_2_2.csv")) {
    compare(copy, "percent", "iec61000_2_2", met);
  }
  CHECK(met + 1 == table("iec61000_2_2").rows.size());
  CHECK(row("iec61000_2_2", Quantity::total_distortion, 0).limit == 8);
}

TEST_CASE("IEEE 519 voltage: single and total by voltage class; only two classes are confirmed") {
  std::size_t met = 0;
  for (const auto& copy : published::read_table("limits/ieee519_voltage.csv")) {
    const std::string condition = copy.at("condition");
    const auto status = copy.at("confirmed") == "1" ? Status::one_copy : Status::from_memory;
    for (int order = 2; order <= 50; ++order, ++met) {
      const auto& one = row("ieee519_voltage", Quantity::harmonic, order, condition);
      CHECK(one.limit == published::number(copy, "single_percent"));
      CHECK(one.status == status);
    }
    CHECK(row("ieee519_voltage", Quantity::total_distortion, 0, condition).limit ==
          published::number(copy, "total_percent"));
    ++met;
  }
  CHECK(met == table("ieee519_voltage").rows.size());
}

TEST_CASE("grid inverters: half a per cent of direct current is confirmed by one copy, the rest is not") {
  for (const char* id : {"ieee1547_2003", "ieee1547_2018"}) {
    const auto& dc = row(id, Quantity::dc_injection, 0);
    CHECK(dc.limit == 0.5);
    CHECK(dc.status == Status::one_copy);
    CHECK(dc.unit == limits::LimitUnit::percent_of_rated_current);
    for (const auto& one : table(id).rows) {
      if (one.quantity != Quantity::dc_injection) CHECK(one.status == Status::from_memory);
    }
  }
  CHECK(row("iec61727", Quantity::dc_injection, 0).status == Status::from_memory);
  // From memory: 4, 2, 1.5, 0.6, 0.3 % by bands of odd orders; even ones a quarter of it in the older
  // edition.
  CHECK(row("ieee1547_2018", Quantity::harmonic, 9).limit == 4);
  CHECK(row("ieee1547_2018", Quantity::harmonic, 11).limit == 2);
  CHECK(row("ieee1547_2018", Quantity::harmonic, 4).limit == 2);
  CHECK(row("ieee1547_2003", Quantity::harmonic, 12).limit == 0.5);
  CHECK(row("ieee519_current", Quantity::harmonic, 11, "Isc/IL 20 to 50").limit == 3.5);
}
