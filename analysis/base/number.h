// Numbers as text, independent of any locale. Every number that enters or leaves the program goes through
// here.
#pragma once

#include <cstdint>
#include <optional>
#include <string>
#include <string_view>

namespace loadstair::base {

/// Reads one decimal number that fills the whole field.
/// text     optional sign (also "+", which instruments send), digits, decimal mark, exponent; blanks around
/// it are
///          skipped. No hexadecimal, no names such as "inf" or "nan" (a dialect knows its sentinels).
/// mark     the decimal mark, '.' or ','.
/// Returns: the nearest double; nullopt when the text is not exactly one number or lies beyond double's range
///          (a magnitude below the smallest subnormal gives zero).
[[nodiscard]] std::optional<double> parse_number(std::string_view text, char mark = '.');

/// The same for a whole number with optional sign.
[[nodiscard]] std::optional<std::int64_t> parse_integer(std::string_view text);

/// The shortest text that reads back to the same double ("0.1", "1e-09"); "nan", "inf", "-inf" for the rest.
[[nodiscard]] std::string print_number(double value);

/// `decimals` places after the point, 0 to 17, rounded half to even on the exact binary value; never "-0.00".
[[nodiscard]] std::string print_fixed(double value, int decimals);

/// `digits` significant digits, 1 to 17, plain notation where the exponent is within -5 to 14, else
/// scientific.
[[nodiscard]] std::string print_significant(double value, int digits);

/// Scientific notation with `decimals` places and a sign, as instruments print it: "+3.85012E+02".
[[nodiscard]] std::string print_scientific(double value, int decimals);

/// A whole number.
[[nodiscard]] std::string print_integer(std::int64_t value);

}  // namespace loadstair::base
