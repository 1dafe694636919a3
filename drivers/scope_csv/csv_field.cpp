#include "drivers/scope_csv/csv_field.h"

#include <array>
#include <cmath>
#include <limits>
#include <string>

#include "analysis/base/number.h"
#include "drivers/scope_csv/csv_text.h"

namespace loadstair::scope_csv {
namespace {

constexpr double kNan = std::numeric_limits<double>::quiet_NaN();

// SCPI-1999 volume 1, 7.2.1.4 and 7.2.1.5: numbers that stand for infinity and for not-a-number.
constexpr double kScpiInfinity = 9.9e37;
constexpr double kScpiNotANumber = 9.91e37;

// Words seen in exports of many programs; compared in lower case and without a sign.
constexpr std::array<std::string_view, 11> kBlankWords = {"",   "nan", "1.#qnan", "1.#ind", "1.#nan", "-",
                                                          "--", "---", "n/a",     "na",     "null"};
constexpr std::array<std::string_view, 11> kClippedWords = {
    "inf", "infinity", "1.#inf", "\u221e", "ol", "ovl", "overflow", "over", "ovfl", "clip", "clipped"};

template <class Words>
bool contains(const Words& words, std::string_view text) {
  for (const auto word : words) {
    if (word == text) return true;
  }
  return false;
}

}  // namespace

FieldValue read_field(std::string_view text, char decimal_mark) {
  if (const auto number = base::parse_number(text, decimal_mark)) {
    const double magnitude = std::abs(*number);
    if (magnitude == kScpiNotANumber) return {FieldKind::kBlank, kNan};
    if (magnitude != kScpiInfinity) return {FieldKind::kNumber, *number};
    return {*number > 0 ? FieldKind::kClippedHigh : FieldKind::kClippedLow, kNan};
  }
  const std::string word = lower(text);
  if (contains(kBlankWords, word)) return {FieldKind::kBlank, kNan};
  const bool negative = word.starts_with('-');
  const auto unsigned_word = std::string_view{word}.substr(negative || word.starts_with('+') ? 1 : 0);
  if (contains(kClippedWords, unsigned_word)) {
    return {negative ? FieldKind::kClippedLow : FieldKind::kClippedHigh, kNan};
  }
  if (unsigned_word == "nan" || unsigned_word == "1.#ind" || unsigned_word == "1.#qnan")
    return {FieldKind::kBlank, kNan};
  return {};
}

int significant_digits(std::string_view number) {
  int digits = 0;
  for (const char c : number) {
    if (c == 'e' || c == 'E') break;
    if (c >= '0' && c <= '9' && (digits > 0 || c != '0')) ++digits;
  }
  return digits;
}

}  // namespace loadstair::scope_csv
