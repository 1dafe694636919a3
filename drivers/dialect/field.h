// dialect: from the bytes of a reply or a line to values, units and quality. SCPI and text lines.
// Not for asking (instrument) nor for what a value means on the bench (daemon/evaluation).
#pragma once

#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"

namespace loadstair::dialect {

enum class Quality {
  good,
  overload,      ///< the instrument said so, in its own words or by a special number
  invalid,       ///< no number could be read
  not_a_number,  ///< the instrument said that it has none (9.91E37)
  unit_changed,  ///< a number, but in another unit than the one expected
};

/// One number as the instrument said it.
struct Field {
  Quality quality = Quality::invalid;
  double value = 0.0;  ///< in the base unit of what was said ("12 mV" is 0.012); 0 where there is no number
  std::string unit;    ///< base unit that was said or, where none was, expected
  std::string why;     ///< for a person, where the quality is not good

  bool operator==(const Field&) const = default;
};

/// How an instrument writes what is not a number.
struct NumberRules {
  std::vector<std::string> overload_words;  ///< "OL", "----"; a sign before them and their case do not count
  double overload_at = 9.9e37;              ///< magnitudes from here on are no numbers
};

/// Not a number (SCPI-1999 volume 1, 7.2.1.5); plus and minus infinity are 9.9E37 and -9.9E37.
inline constexpr double kScpiNotANumber = 9.91e37;

/// Reads one number, with or without a unit behind it ("+3.85E+02", "385 V", "12.1mV", "#HA2F", "OL").
/// text           blanks around it are skipped; the whole of it is consumed or the field is invalid.
/// expected_unit  as the profile declares it; its prefix applies to a bare number ("mV": 12 is 0.012 V).
/// Empty: a
///                number without unit, taken as it is.
/// Forms: NR1, NR2, NR3 and what tolerant readers accept besides (IEEE 488.2-1992, 8.7.2 to 8.7.4: lower-case
/// e, exponent without sign, no digits on one side of the point); #H, #Q, #B (8.7.5 to 8.7.7).
[[nodiscard]] Field read_field(std::string_view text, std::string_view expected_unit,
                               const NumberRules& rules);

/// What can be told from the look of a number. A meter that prints a fixed form and suddenly another one was
/// cut short, or has changed its range.
struct NumberShape {
  bool point = false;
  int decimals = 0;
  int exponent_digits = 0;  ///< 0: no exponent

  auto operator<=>(const NumberShape&) const = default;
};

/// The shape of the number that `text` begins with (blanks and sign skipped).
[[nodiscard]] NumberShape shape_of(std::string_view text);

}  // namespace loadstair::dialect
