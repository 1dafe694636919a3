// What must hold for any bytes as a line pattern and any bytes as a line (divided by the first newline).
#pragma once

#include <cmath>
#include <string>
#include <string_view>

#include "drivers/dialect/text_line.h"

namespace loadstair::fuzz {

/// Returns: what does not hold, or an empty string.
inline std::string broken_by_text_line(std::string_view input) {
  using namespace dialect;
  const auto end = input.find('\n');
  const auto pattern_text = input.substr(0, end);
  const auto line = end == std::string_view::npos ? std::string_view{} : input.substr(end + 1);
  const NumberRules rules{{"OL", "0L", "----"}, 9.9e37};
  const auto pattern = LinePattern::parse(pattern_text);
  if (!pattern) return pattern.refusal().reason.empty() ? "a refusal without a reason" : "";
  const auto field = pattern->read(line, "degC", rules);
  // Blanks around a line never matter.
  if (pattern->read(" \t" + std::string{line} + "  ", "degC", rules) != field) return "outer blanks matter";
  if (!field) return {};
  if (!std::isfinite(field->value)) return "a value that is not finite";
  const bool number = field->quality == Quality::good || field->quality == Quality::unit_changed;
  if (!number && field->value != 0.0) return "a value where there is no number";
  if (field->quality == Quality::good && field->unit != "degC") return "good in a foreign unit";
  return {};
}

}  // namespace loadstair::fuzz
