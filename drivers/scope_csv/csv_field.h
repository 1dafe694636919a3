// Inside the room: what one field of a row says, and the fast scanner of plain numbers.
#pragma once

#include <cstddef>
#include <cstdint>
#include <string_view>

namespace loadstair::scope_csv {

/// What a field of the data says.
enum class FieldKind { kNumber, kClippedHigh, kClippedLow, kBlank, kOther };

struct FieldValue {
  FieldKind kind = FieldKind::kOther;
  double value = 0.0;  ///< of a number; NaN for clipped and blank
};

/// Reads a whole field, trimmed and without quotes: the plain way, by base::parse_number and by words.
[[nodiscard]] FieldValue read_field(std::string_view text, char decimal_mark);

/// Digits from the first one that is not zero to the last one printed: "0.0120e5" has 3. 0 for a zero.
[[nodiscard]] int significant_digits(std::string_view number);

/// A number met by the fast scanner.
struct PlainNumber {
  const char* end = nullptr;  ///< behind the last character of the number; null: take the plain way
  double value = 0.0;
  std::uint64_t mantissa = 0;  ///< all its digits as one whole number
};

/// Scans the number that begins at `at`, where it is one of those that a double division or multiplication
/// rounds right: at most 2^53 as a whole number, times ten to a power within -22 and 22 (Clinger 1990,
/// section 4: both factors are exact, one rounding). All others give a null end and are read by read_field;
/// SCPI's 9.9E37 is among them, since 2^53 times 1e22 is less. at  in a buffer in which a character that
/// belongs to no number (a line end) follows Agrees with base::parse_number on every number that it takes; it
/// may leave text behind `end`, for the caller to judge.
[[nodiscard]] inline PlainNumber scan_plain_number(const char* at, char decimal_mark) {
  static constexpr double kPowersOfTen[] = {1e0,  1e1,  1e2,  1e3,  1e4,  1e5,  1e6,  1e7,
                                            1e8,  1e9,  1e10, 1e11, 1e12, 1e13, 1e14, 1e15,
                                            1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22};
  constexpr int kMostDigits = 19;
  const auto digit = [](char c) { return static_cast<unsigned>(static_cast<unsigned char>(c)) - '0'; };
  const bool negative = *at == '-';
  if (negative || *at == '+') ++at;

  std::uint64_t mantissa = 0;
  const char* const whole = at;
  for (unsigned d = digit(*at); d <= 9; d = digit(*++at)) mantissa = mantissa * 10 + d;
  std::ptrdiff_t digits = at - whole;
  std::ptrdiff_t exponent = 0;
  if (*at == decimal_mark) {
    const char* const fraction = ++at;
    for (unsigned d = digit(*at); d <= 9; d = digit(*++at)) mantissa = mantissa * 10 + d;
    exponent = fraction - at;
    digits -= exponent;
  }
  if (digits == 0 || digits > kMostDigits) return {};
  if (*at == 'e' || *at == 'E') {
    ++at;
    const bool down = *at == '-';
    if (down || *at == '+') ++at;
    const char* const power = at;
    int value = 0;
    for (unsigned d = digit(*at); d <= 9; d = digit(*++at)) {
      if (at - power > 4) return {};
      value = value * 10 + static_cast<int>(d);
    }
    if (at == power) return {};
    exponent += down ? -value : value;
  }
  if (mantissa > (std::uint64_t{1} << 53U) || exponent < -22 || exponent > 22) return {};
  double value = static_cast<double>(mantissa);
  value = exponent < 0 ? value / kPowersOfTen[-exponent] : value * kPowersOfTen[exponent];
  return {at, negative ? -value : value, mantissa};
}

}  // namespace loadstair::scope_csv
