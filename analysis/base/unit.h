// Units and SI prefixes as instruments and people write them.
#pragma once

#include <optional>
#include <string>
#include <string_view>

namespace loadstair::base {

/// A unit reduced to its base form: value_in_base = value * scale.
struct ParsedUnit {
  double scale = 1.0;  ///< 1e-3 for "mV"
  std::string unit;    ///< "V", "A", "W", "VA", "var", "Hz", "ohm", "degC", "K", "s", "F", "H", "%", "1", ...

  bool operator==(const ParsedUnit&) const = default;
};

/// Reads a unit with an optional SI prefix (p n u µ m k M G): "mV" -> {1e-3, "V"}, "kohm" and "kΩ" -> {1e3,
/// "ohm"}, "°C" and "degC" -> {1, "degC"}. Case counts, since m and M differ; "Vdc", "VDC", "Vac", "VAC",
/// "Vrms" are V. Returns: nullopt for a unit that is not known.
[[nodiscard]] std::optional<ParsedUnit> parse_unit(std::string_view text);

}  // namespace loadstair::base
