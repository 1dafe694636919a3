#include "analysis/base/number.h"

#include <algorithm>
#include <array>
#include <charconv>
#include <cmath>

#include "analysis/base/require.h"

namespace loadstair::base {
namespace {

std::string_view trim(std::string_view text) {
  constexpr std::string_view kBlank = " \t\r\n";
  const auto first = text.find_first_not_of(kBlank);
  if (first == std::string_view::npos) return {};
  return text.substr(first, text.find_last_not_of(kBlank) - first + 1);
}

bool starts_like_a_number(std::string_view text) {
  if (!text.empty() && (text.front() == '-' || text.front() == '+')) text.remove_prefix(1);
  return !text.empty() && (text.front() == '.' || (text.front() >= '0' && text.front() <= '9'));
}

/// from_chars says "out of range" for too large and too small alike. Beyond double's range on either side the
/// sum of the exponent and the place of the first digit that counts is far from zero, and its sign tells
/// which.
bool is_tiny(std::string_view text) {
  const auto mark = text.find_first_of("eE");
  const auto mantissa = text.substr(0, mark);
  if (mark != std::string_view::npos) {
    const auto exponent = text.substr(mark + 1);
    const bool has_sign = !exponent.empty() && (exponent.front() == '-' || exponent.front() == '+');
    if (exponent.size() > 6U + (has_sign ? 1U : 0U)) return exponent.front() == '-';
  }
  const auto exponent = mark == std::string_view::npos ? 0 : parse_integer(text.substr(mark + 1)).value_or(0);
  const auto point = std::min(mantissa.find('.'), mantissa.size());
  const auto first = mantissa.find_first_of("123456789");
  if (first == std::string_view::npos) return true;
  return exponent + static_cast<std::int64_t>(point) - static_cast<std::int64_t>(first) < 0;
}

template <class... Format>
std::string print(double value, Format... format) {
  std::array<char, 512> buffer{};
  const auto [end, error] = std::to_chars(buffer.data(), buffer.data() + buffer.size(), value, format...);
  require(error == std::errc{}, "a number fits its print buffer");
  return {buffer.data(), end};
}

}  // namespace

std::optional<double> parse_number(std::string_view text, char mark) {
  text = trim(text);
  if (!starts_like_a_number(text)) {
    // ",5" with a decimal comma is a number too.
    std::string_view rest = text;
    if (!rest.empty() && (rest.front() == '-' || rest.front() == '+')) rest.remove_prefix(1);
    if (mark != ',' || rest.size() < 2 || rest.front() != ',') return std::nullopt;
  }
  if (text.front() == '+') text.remove_prefix(1);
  std::string pointed;
  if (mark != '.') {
    if (text.find('.') != std::string_view::npos) return std::nullopt;
    pointed = text;
    if (const auto at = pointed.find(mark); at != std::string::npos) pointed[at] = '.';
    text = pointed;
  }
  double value = 0.0;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), value);
  if (end != text.data() + text.size()) return std::nullopt;
  if (error == std::errc::result_out_of_range) {
    if (!is_tiny(text)) return std::nullopt;
    return text.front() == '-' ? -0.0 : 0.0;
  }
  if (error != std::errc{}) return std::nullopt;
  return value;
}

std::optional<std::int64_t> parse_integer(std::string_view text) {
  text = trim(text);
  if (text.size() > 1 && text.front() == '+' && text[1] != '-') text.remove_prefix(1);
  std::int64_t value = 0;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), value);
  if (error != std::errc{} || end != text.data() + text.size()) return std::nullopt;
  return value;
}

std::string print_number(double value) {
  if (std::isnan(value)) return "nan";
  if (std::isinf(value)) return value > 0 ? "inf" : "-inf";
  return print(value);
}

std::string print_fixed(double value, int decimals) {
  require(decimals >= 0 && decimals <= 17, "0 to 17 decimals");
  if (!std::isfinite(value)) return print_number(value);
  std::string text = print(value, std::chars_format::fixed, decimals);
  if (text.front() == '-' && text.find_first_of("123456789") == std::string::npos) text.erase(0, 1);
  return text;
}

std::string print_significant(double value, int digits) {
  require(digits >= 1 && digits <= 17, "1 to 17 significant digits");
  if (!std::isfinite(value)) return print_number(value);
  if (value == 0.0) return print_fixed(0.0, digits - 1);
  const std::string scientific = print(value, std::chars_format::scientific, digits - 1);
  const int exponent =
      static_cast<int>(parse_integer(scientific.substr(scientific.find('e') + 1)).value_or(0));
  if (exponent < -5 || exponent > 14) return scientific;
  const int decimals = digits - 1 - exponent;
  if (decimals >= 0) return print(value, std::chars_format::fixed, decimals);
  // More places before the point than digits: round first, then print the rounded value in full.
  return print(parse_number(scientific).value_or(value), std::chars_format::fixed, 0);
}

std::string print_scientific(double value, int decimals) {
  require(decimals >= 0 && decimals <= 17, "0 to 17 decimals");
  if (!std::isfinite(value)) return print_number(value);
  std::string text = print(value, std::chars_format::scientific, decimals);
  if (text.front() != '-') text.insert(0, "+");
  text[text.find('e')] = 'E';
  return text;
}

std::string print_integer(std::int64_t value) {
  std::array<char, 24> buffer{};
  const auto result = std::to_chars(buffer.data(), buffer.data() + buffer.size(), value);
  return {buffer.data(), result.ptr};
}

}  // namespace loadstair::base
