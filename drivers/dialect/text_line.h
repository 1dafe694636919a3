// Lines that an instrument prints unasked: thermometers, multimeters with a data output, panel meters.
#pragma once

#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"
#include "drivers/dialect/field.h"

namespace loadstair::dialect {

/// What a line must look like to hold a value.
///
/// A pattern is the line itself with places in braces:
///   {value}   a number or an overload word; blanks may stand between sign and digits. Exactly one per
///   pattern. {unit}    a unit, with or without SI prefix: V, mV, kohm, C, degC, % {prefix}  an SI prefix
///   that stands apart from its unit, or nothing: "{value} {prefix} {unit}" {text}    one run of non-blank
///   characters, not looked at {rest}    everything up to the end, possibly nothing; only at the end
/// A blank in the pattern stands for any number of blanks or tabs; for at least one where letters or digits
/// of the pattern stand on both sides, else also for none. Blanks around a line do not count. Everything else
/// must be there letter by letter. "{{" stands for one brace.
///
///   "T1 heatsink {value} {unit}"   matches "T1 heatsink 45.2 C" and "T1 heatsink  - 3.1C"
///   "{text} {value}{unit} {rest}"  matches "0017 12.031mV DC stable"
///
/// After an overload word unit and prefix may be missing.
class LinePattern {
 public:
  /// Refusals: place is "column N" of the pattern; an unknown place, no or two {value}, two {unit}, {prefix}
  /// without {unit} after it, {rest} before the end, a brace that does not end.
  [[nodiscard]] static base::Outcome<LinePattern> parse(std::string_view pattern);

  /// Reads a line. expected_unit as in read_field; also the unit of a pattern without {unit}.
  /// Returns: nullopt when the line does not look like the pattern; else the value, which is invalid when the
  /// line has the pattern's look and an unknown unit.
  [[nodiscard]] std::optional<Field> read(std::string_view line, std::string_view expected_unit,
                                          const NumberRules& rules) const;

 private:
  enum class Kind { literal, blanks, some_blanks, value, prefix, unit, text, rest };
  struct Part {
    Kind kind;
    std::string literal;
  };
  struct Scan;

  static std::optional<Kind> kind_of(std::string_view place);
  [[nodiscard]] base::Outcome<void> check() const;

  std::vector<Part> parts_;
};

}  // namespace loadstair::dialect
