#include "drivers/dialect/field.h"

#include <optional>

#include "drivers/dialect/number_token.h"
#include "drivers/dialect/text.h"

namespace loadstair::dialect {
namespace {

int digit_of(char c) {
  if (is_digit(c)) return c - '0';
  const char lower = to_lower(c);
  return lower >= 'a' && lower <= 'f' ? lower - 'a' + 10 : 99;
}

/// #HA2F, #Q62, #B01011 (IEEE 488.2-1992, 8.7.5 to 8.7.7). At most 53 bits, which a double holds exactly.
std::optional<double> read_nondecimal(std::string_view text) {
  if (text.size() < 3 || text.front() != '#') return std::nullopt;
  const char letter = to_lower(text[1]);
  const int base = letter == 'h' ? 16 : letter == 'q' ? 8 : letter == 'b' ? 2 : 0;
  if (base == 0) return std::nullopt;
  double value = 0.0;
  for (const char c : text.substr(2)) {
    if (digit_of(c) >= base) return std::nullopt;
    value = value * base + digit_of(c);
    if (value >= 9007199254740992.0) return std::nullopt;
  }
  return value;
}

}  // namespace

Field read_field(std::string_view text, std::string_view expected_unit, const NumberRules& rules) {
  text = trim(text);
  if (const auto value = read_nondecimal(text)) {
    return make_field({text.size(), Quality::good, *value}, {}, expected_unit);
  }
  const auto token = find_number(text, rules);
  if (!token) {
    const std::string why = text.empty() ? "an empty field instead of a number"
                                         : "'" + printable(text) + "'" + " is not a number";
    return {Quality::invalid, 0.0, {}, why};
  }
  auto field = make_field(*token, trim(text.substr(token->length)), expected_unit);
  if (field.quality == Quality::invalid) field.why = "'" + printable(text) + "'" + ": " + field.why;
  return field;
}

NumberShape shape_of(std::string_view text) {
  text = trim(text);
  if (!text.empty() && (text.front() == '+' || text.front() == '-')) text = trim(text.substr(1));
  NumberShape shape;
  std::size_t at = 0;
  while (at < text.size() && is_digit(text[at])) ++at;
  if (at < text.size() && text[at] == '.') {
    shape.point = true;
    for (++at; at < text.size() && is_digit(text[at]); ++at) ++shape.decimals;
  }
  if (at < text.size() && to_lower(text[at]) == 'e') {
    ++at;
    if (at < text.size() && (text[at] == '+' || text[at] == '-')) ++at;
    for (; at < text.size() && is_digit(text[at]); ++at) ++shape.exponent_digits;
  }
  return shape;
}

}  // namespace loadstair::dialect
