#include "drivers/scope_csv/csv_field.h"

#include <bit>
#include <catch2/catch.hpp>
#include <cmath>
#include <cstdint>
#include <cstdlib>
#include <random>
#include <string>

#include "analysis/base/number.h"

using namespace loadstair;
using namespace loadstair::scope_csv;

namespace {

/// The scanner takes the whole text, or leaves it to the plain way.
std::optional<double> scanned(const std::string& text, char mark) {
  const std::string line = text + "\n";
  const auto number = scan_plain_number(line.c_str(), mark);
  if (number.end != line.c_str() + text.size()) return std::nullopt;
  return number.value;
}

std::uint64_t bits(double value) {
  return std::bit_cast<std::uint64_t>(value);
}

std::string random_text(std::mt19937_64& draw) {
  // Half of them numbers in form, half of them any succession of the characters of numbers.
  const auto pick = [&](std::uint64_t below) { return draw() % below; };
  std::string text;
  if (pick(2) == 0) {
    const std::size_t length = pick(14);
    for (std::size_t k = 0; k < length; ++k) text += std::string_view{"0123456789.,eE+-"}[pick(16)];
    return text;
  }
  const auto digits = [&](std::uint64_t most) {
    for (std::uint64_t n = pick(most + 1); n > 0; --n) text += static_cast<char>('0' + pick(10));
  };
  if (pick(3) == 0) text += "+-"[pick(2)];
  digits(12);
  if (pick(4) != 0) {
    text += pick(5) == 0 ? ',' : '.';
    digits(12);
  }
  if (pick(2) == 0) {
    text += pick(2) == 0 ? 'e' : 'E';
    if (pick(2) == 0) text += "+-"[pick(2)];
    digits(3);
  }
  return text;
}

}  // namespace

TEST_CASE("the fast scanner agrees with base::parse_number on every number that it takes") {
  const char* given = std::getenv("LOADSTAIR_TEST_SEED");
  const auto seed = base::parse_integer(given != nullptr ? given : "20261").value();
  INFO("LOADSTAIR_TEST_SEED=" << seed);
  std::mt19937_64 draw{static_cast<std::uint64_t>(seed)};
  std::size_t taken = 0;
  for (int k = 0; k < 300000; ++k) {
    const std::string text = random_text(draw);
    for (const char mark : {'.', ','}) {
      const auto fast = scanned(text, mark);
      if (!fast) continue;
      ++taken;
      const auto plain = base::parse_number(text, mark);
      if (!plain || bits(*plain) != bits(*fast)) {
        INFO(text << " with mark " << mark);
        REQUIRE(plain.has_value());
        REQUIRE(bits(*plain) == bits(*fast));
      }
    }
  }
  CHECK(taken > 100000);
}

TEST_CASE("the fast scanner takes what scopes print and leaves the rest to the plain way") {
  CHECK(scanned("-1.234567E-03", '.') == -1.234567e-3);
  CHECK(scanned("+3,85012E+02", ',') == 385.012);
  CHECK(scanned("5.", '.') == 5.0);
  CHECK(scanned(",5", ',') == 0.5);
  CHECK(std::signbit(scanned("-0", '.').value()));
  CHECK_FALSE(scanned("", '.'));
  CHECK_FALSE(scanned(".", '.'));
  CHECK_FALSE(scanned("1e", '.'));
  CHECK_FALSE(scanned("+-1", '.'));
  CHECK_FALSE(scanned("1.5", ','));
  // Beyond one exact rounding: 2^53 + 1 needs the plain way.
  CHECK_FALSE(scanned("9007199254740993", '.'));
  CHECK(read_field("9007199254740993", '.').value == 9007199254740992.0);
  CHECK_FALSE(scanned("1e23", '.'));
  CHECK_FALSE(scanned("12345678901234567890123", '.'));
}

TEST_CASE("fields that are no numbers") {
  CHECK(read_field("", '.').kind == FieldKind::kBlank);
  CHECK(read_field("NaN", '.').kind == FieldKind::kBlank);
  CHECK(read_field("---", '.').kind == FieldKind::kBlank);
  CHECK(read_field("-nan", '.').kind == FieldKind::kBlank);
  CHECK(read_field("inf", '.').kind == FieldKind::kClippedHigh);
  CHECK(read_field("+Infinity", '.').kind == FieldKind::kClippedHigh);
  CHECK(read_field("-\u221e", '.').kind == FieldKind::kClippedLow);
  CHECK(read_field("-1.#INF", '.').kind == FieldKind::kClippedLow);
  CHECK(read_field("OL", '.').kind == FieldKind::kClippedHigh);
  CHECK(read_field("5V", '.').kind == FieldKind::kOther);
  CHECK(read_field("1e999", '.').kind == FieldKind::kOther);
  // SCPI-1999 volume 1, 7.2.1.4 and 7.2.1.5.
  CHECK(read_field("9.9E37", '.').kind == FieldKind::kClippedHigh);
  CHECK(read_field("-9.90000E+37", '.').kind == FieldKind::kClippedLow);
  CHECK(read_field("9.91E+37", '.').kind == FieldKind::kBlank);
  CHECK(read_field("9.92E+37", '.').kind == FieldKind::kNumber);
}
