// Where a number or an overload word ends within a text. Shared by the parsers of this room.
#pragma once

#include <cstddef>
#include <optional>
#include <string>
#include <string_view>

#include "drivers/dialect/field.h"

namespace loadstair::dialect {

/// A number or overload word at the beginning of a text.
struct NumberToken {
  std::size_t length = 0;  ///< characters used, sign and blanks after it included
  Quality quality = Quality::invalid;
  double value = 0.0;  ///< as written, no unit applied
};

/// Finds the longest number (sign, possibly blanks, digits, point, exponent) or the longest overload word
/// that `text` begins with, and judges it by the rules. Returns: nullopt when it begins with neither.
[[nodiscard]] std::optional<NumberToken> find_number(std::string_view text, const NumberRules& rules);

/// The field that a token with a written unit (empty: none) makes where `expected_unit` is expected.
[[nodiscard]] Field make_field(const NumberToken& token, std::string_view written_unit,
                               std::string_view expected_unit);

}  // namespace loadstair::dialect
