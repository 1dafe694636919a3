#include "drivers/dialect/number_token.h"

#include <algorithm>
#include <cmath>

#include "analysis/base/number.h"
#include "analysis/base/unit.h"
#include "drivers/dialect/text.h"

namespace loadstair::dialect {
namespace {

std::size_t count_digits(std::string_view text, std::size_t from) {
  auto at = from;
  while (at < text.size() && is_digit(text[at])) ++at;
  return at - from;
}

/// Sign and the blanks that some displays print after it.
std::size_t sign_length(std::string_view text) {
  if (text.empty() || (text.front() != '+' && text.front() != '-')) return 0;
  std::size_t at = 1;
  while (at < text.size() && (text[at] == ' ' || text[at] == '\t')) ++at;
  return at;
}

/// Digits, point, digits, exponent, without sign; 0 when there is none.
std::size_t decimal_length(std::string_view text) {
  const auto before = count_digits(text, 0);
  auto at = before;
  std::size_t after = 0;
  if (at < text.size() && text[at] == '.') {
    after = count_digits(text, at + 1);
    at += 1 + after;
  }
  if (before + after == 0) return 0;
  if (at < text.size() && (text[at] == 'e' || text[at] == 'E')) {
    auto digits_at = at + 1;
    if (digits_at < text.size() && (text[digits_at] == '+' || text[digits_at] == '-')) ++digits_at;
    if (const auto digits = count_digits(text, digits_at); digits > 0) at = digits_at + digits;
  }
  return at;
}

/// At the 24 bits of a binary32, in which many instruments hold it.
bool is_scpi_not_a_number(double value) {
  return std::abs(value / kScpiNotANumber - 1.0) < 1e-6;
}

Quality judge(double value, const NumberRules& rules) {
  if (is_scpi_not_a_number(value)) return Quality::not_a_number;
  return std::abs(value) >= rules.overload_at ? Quality::overload : Quality::good;
}

}  // namespace

std::optional<NumberToken> find_number(std::string_view text, const NumberRules& rules) {
  const auto sign = sign_length(text);
  const auto unsigned_text = text.substr(sign);
  const auto decimal = decimal_length(unsigned_text);

  // "0L" is a word although it begins with a digit, "----" although it begins with signs: the longest wins.
  std::size_t word_length = 0;
  for (const auto& word : rules.overload_words) {
    if (word.empty()) continue;
    if (begins_with_word(unsigned_text, word)) word_length = std::max(word_length, sign + word.size());
    if (begins_with_word(text, word)) word_length = std::max(word_length, word.size());
  }
  if (word_length > 0 && word_length > (decimal > 0 ? sign + decimal : 0)) {
    return NumberToken{word_length, Quality::overload, 0.0};
  }
  if (decimal == 0) return std::nullopt;

  NumberToken token{sign + decimal, Quality::invalid, 0.0};
  const auto magnitude = base::parse_number(unsigned_text.substr(0, decimal));
  if (!magnitude) return token;  // beyond the range of a double
  token.value = text.front() == '-' ? -*magnitude : *magnitude;
  token.quality = judge(token.value, rules);
  return token;
}

Field make_field(const NumberToken& token, std::string_view written_unit, std::string_view expected_unit) {
  const auto expected =
      base::parse_unit(expected_unit).value_or(base::ParsedUnit{1.0, std::string{expected_unit}});
  Field field{token.quality, 0.0, expected.unit, {}};
  const auto written = base::parse_unit(written_unit);
  // "1" is a unit in our files; in a reply it is a second number.
  if (!written_unit.empty() && (!written || written->unit == "1")) {
    field.quality = Quality::invalid;
    field.why = "'" + printable(written_unit) + "' is not a known unit";
    return field;
  }
  if (token.quality == Quality::overload) {
    field.why = "overload";
    return field;
  }
  if (token.quality == Quality::not_a_number) {
    field.why = "not a number, says the instrument";
    return field;
  }
  if (token.quality == Quality::invalid) {
    field.why = "a number beyond all bounds";
    return field;
  }
  if (!written) {
    field.value = token.value * expected.scale;
    return field;
  }
  field.value = token.value * written->scale;
  field.unit = written->unit;
  if (written->unit != expected.unit) {
    field.quality = Quality::unit_changed;
    field.why = "unit " + written->unit + " instead of " + (expected.unit.empty() ? "none" : expected.unit);
  }
  return field;
}

}  // namespace loadstair::dialect
