#include "analysis/base/unit.h"

#include <array>
#include <utility>

namespace loadstair::base {
namespace {

struct Name {
  std::string_view written;
  std::string_view unit;
};

// The first column is what may stand after a prefix; the second is our one spelling.
constexpr std::array kNames = {
    Name{"V", "V"},        Name{"Vdc", "V"},      Name{"VDC", "V"},  Name{"Vac", "V"},   Name{"VAC", "V"},
    Name{"Vrms", "V"},     Name{"Volt", "V"},     Name{"A", "A"},    Name{"Adc", "A"},   Name{"ADC", "A"},
    Name{"Aac", "A"},      Name{"AAC", "A"},      Name{"Arms", "A"}, Name{"W", "W"},     Name{"VA", "VA"},
    Name{"var", "var"},    Name{"VAr", "var"},    Name{"Hz", "Hz"},  Name{"ohm", "ohm"}, Name{"Ohm", "ohm"},
    Name{"\u03a9", "ohm"}, Name{"\u2126", "ohm"}, Name{"s", "s"},    Name{"F", "F"},     Name{"H", "H"},
    Name{"K", "K"},        Name{"J", "J"},        Name{"Wh", "Wh"},
};

// These take no prefix: "mdegC" is a typing error, not a unit.
constexpr std::array kWhole = {
    Name{"degC", "degC"}, Name{"\u00b0C", "degC"}, Name{"C", "degC"},     Name{"%", "%"},
    Name{"1", "1"},       Name{"deg", "deg"},      Name{"\u00b0", "deg"},
};

constexpr std::array<std::pair<std::string_view, double>, 9> kPrefixes = {{
    {"p", 1e-12},
    {"n", 1e-9},
    {"u", 1e-6},
    {"\u00b5", 1e-6},
    {"\u03bc", 1e-6},
    {"m", 1e-3},
    {"k", 1e3},
    {"M", 1e6},
    {"G", 1e9},
}};

template <class Names>
std::optional<std::string> find(const Names& names, std::string_view text) {
  for (const auto& name : names) {
    if (name.written == text) return std::string{name.unit};
  }
  return std::nullopt;
}

}  // namespace

std::optional<ParsedUnit> parse_unit(std::string_view text) {
  if (auto unit = find(kNames, text)) return ParsedUnit{1.0, *unit};
  if (auto unit = find(kWhole, text)) return ParsedUnit{1.0, *unit};
  for (const auto& [prefix, scale] : kPrefixes) {
    if (!text.starts_with(prefix)) continue;
    if (auto unit = find(kNames, text.substr(prefix.size()))) return ParsedUnit{scale, *unit};
  }
  return std::nullopt;
}

}  // namespace loadstair::base
