// Student's t: the printed table, and closed forms.
#include <catch2/catch.hpp>
#include <cmath>
#include <limits>
#include <numbers>

#include "analysis/estimate/coverage.h"
#include "published/table.h"

using namespace loadstair;

TEST_CASE("Student's t agrees with JCGM 100 table G.2 (from memory)") {
  for (const auto& row : published::read_table("student_t/table_g2.csv")) {
    const std::string& text = row.at("degrees_of_freedom");
    INFO(text);
    const double nu = text == "inf" ? std::numeric_limits<double>::infinity()
                                    : published::number(row, "degrees_of_freedom");
    // Two decimals are printed, three from 100 degrees of freedom on.
    const double half_digit = nu >= 100 ? 0.00051 : 0.0051;
    CHECK(std::abs(estimate::student_t(0.95, nu) - published::number(row, "t95")) <= half_digit);
    CHECK(std::abs(estimate::student_t(0.99, nu) - published::number(row, "t99")) <= half_digit);
  }
}

TEST_CASE("Student's t agrees with its closed forms for 1, 2 and 4 degrees of freedom") {
  for (const double p : {0.5, 0.68, 0.95, 0.99, 0.999}) {
    INFO(p);
    CHECK(estimate::student_t(p, 1) == Approx(std::tan(std::numbers::pi * p / 2)).epsilon(1e-10));
    CHECK(estimate::student_t(p, 2) == Approx(p * std::sqrt(2 / (1 - p * p))).epsilon(1e-10));
    // t4 = 2 sqrt(q - 1), q = cos(acos(sqrt a)/3)/sqrt a, a = (1 + p)(1 - p) for two-sided p (Shaw 2006).
    const double root = std::sqrt((1 + p) * (1 - p));
    const double q = std::cos(std::acos(root) / 3) / root;
    CHECK(estimate::student_t(p, 4) == Approx(2 * std::sqrt(q - 1)).epsilon(1e-10));
  }
}

TEST_CASE("Student's t falls with its degrees of freedom, whole or not, to the normal quantile") {
  double last = estimate::student_t(0.95, 0.5);
  for (double nu = 0.75; nu < 1e6; nu *= 1.3) {
    const double here = estimate::student_t(0.95, nu);
    CHECK(here < last);
    last = here;
  }
  // 1.959963984540054: the normal quantile, any table of ten digits or more.
  CHECK(estimate::student_t(0.95, std::numeric_limits<double>::infinity()) ==
        Approx(1.959963984540054).epsilon(1e-13));
  CHECK(last == Approx(1.959963984540054).epsilon(1e-5));
}
