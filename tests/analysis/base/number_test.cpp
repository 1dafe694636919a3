#include "analysis/base/number.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <limits>

using namespace loadstair::base;

TEST_CASE("numbers are read whole, with the signs and exponents that instruments send") {
  CHECK(parse_number("+3.85012E+02") == 385.012);
  CHECK(parse_number(" -0.5\r\n") == -0.5);
  CHECK(parse_number(".5") == 0.5);
  CHECK(parse_number("5.") == 5.0);
  CHECK(parse_number("3,5", ',') == 3.5);
  CHECK(parse_number("-,5", ',') == -0.5);
  CHECK_FALSE(parse_number("3,5"));
  CHECK_FALSE(parse_number("3.5", ','));
  CHECK_FALSE(parse_number("3.5V"));
  CHECK_FALSE(parse_number("+-3"));
  CHECK_FALSE(parse_number(""));
  CHECK_FALSE(parse_number("+"));
  CHECK_FALSE(parse_number("nan"));
  CHECK_FALSE(parse_number("inf"));
  CHECK_FALSE(parse_number("0x10"));
}

TEST_CASE("numbers beyond the range of double") {
  // IEEE 754 binary64: largest 1.797...e308, smallest subnormal 4.94e-324.
  CHECK(parse_number("1.7976931348623157e308") == std::numeric_limits<double>::max());
  CHECK(parse_number("4.9406564584124654e-324") == std::numeric_limits<double>::denorm_min());
  CHECK_FALSE(parse_number("1e309"));
  CHECK_FALSE(parse_number("1e99999999999"));
  CHECK_FALSE(parse_number("-1000e307"));
  CHECK(parse_number("1e-400") == 0.0);
  CHECK(parse_number("1e-99999999999") == 0.0);
  CHECK(std::signbit(parse_number("-1e-400").value()));
}

TEST_CASE("numbers print and read back") {
  for (const double value : {0.1, 1.0 / 3.0, 385.012, 1e-9, -2.5e300, 123456789.0}) {
    CHECK(parse_number(print_number(value)) == value);
  }
  CHECK(print_fixed(96.449999999999, 2) == "96.45");
  CHECK(print_fixed(-0.001, 2) == "0.00");
  CHECK(print_significant(1234.56, 3) == "1230");
  CHECK(print_significant(0.00123456, 3) == "0.00123");
  CHECK(print_significant(999.96, 4) == "1000");
  CHECK(print_scientific(385.012, 5) == "+3.85012E+02");
  CHECK(parse_integer("+12") == 12);
  CHECK_FALSE(parse_integer("12.0"));
}
