#include "drivers/dialect/text_line.h"

#include <catch2/catch.hpp>

namespace {

using namespace loadstair::dialect;

const NumberRules kRules{{"OL", "----", "open"}, 9.9e37};

std::optional<Field> read(std::string_view pattern, std::string_view line, std::string_view unit = "degC") {
  const auto made = LinePattern::parse(pattern);
  REQUIRE(made.ok());
  return made->read(line, unit, kRules);
}

double value_of(std::string_view pattern, std::string_view line, std::string_view unit = "degC") {
  const auto field = read(pattern, line, unit);
  REQUIRE(field.has_value());
  CHECK(field->why == "");
  CHECK(field->quality == Quality::good);
  return field->value;
}

}  // namespace

TEST_CASE("several channels in one stream are told apart by their names") {
  CHECK(value_of("T1 heatsink {value} {unit}", "T1 heatsink 45.2 C") == 45.2);
  CHECK(value_of("T1 heatsink {value} {unit}", "  T1\theatsink   -3.1C ") == -3.1);
  CHECK_FALSE(read("T1 heatsink {value} {unit}", "T2 ambient 23.0 C"));
  CHECK_FALSE(read("T1 heatsink {value} {unit}", "T1heatsink 45.2 C"));
  CHECK_FALSE(read("T1 heatsink {value} {unit}", "T1 heatsink 45.2 C T2"));
}

TEST_CASE("prefixes scale, together with their unit or apart from it") {
  CHECK(value_of("{value} {unit}", "12.031 mV", "V") == 12.031 * 1e-3);
  CHECK(value_of("{value}{unit}", "12.031mV", "V") == 12.031 * 1e-3);
  CHECK(value_of("{value} {prefix} {unit}", "12.031 m V", "V") == 12.031 * 1e-3);
  CHECK(value_of("{value} {prefix} {unit}", "12.031 V", "V") == 12.031);
  CHECK(value_of("{value} {prefix}{unit}", "12.031 kohm", "ohm") == 12.031 * 1e3);
  CHECK(value_of("{value} {unit}", "4.7 k\xce\xa9", "ohm") == 4.7e3);
  CHECK(value_of("{value}", "4.7", "mV") == 4.7 * 1e-3);
}

TEST_CASE("signs may stand apart from their digits") {
  CHECK(value_of("{value} {unit}", "-  0.385 V", "V") == -0.385);
  CHECK(value_of("DC {value} {unit}", "DC + 0.385 V", "V") == 0.385);
  CHECK(value_of("DC{value}{unit}", "DC-0.385V", "V") == -0.385);
}

TEST_CASE("what is not looked at may be anything") {
  CHECK(value_of("{text} {value} {unit} {rest}", "0017 385.1 V DC stable", "V") == 385.1);
  CHECK(value_of("{text} {value} {unit} {rest}", "0017 385.1 V", "V") == 385.1);
  CHECK(value_of("{text} {text} {value} {unit}", "45.2 C 38.1 C") == 38.1);
  CHECK(value_of("{{ {value} }", "{ 5 }", "") == 5.0);
}

TEST_CASE("overload words stand for the number and may lack the unit") {
  for (const auto* line : {"T1 OL", "T1 OL C", "T1 ---- C", "T1 Open", "T1 -OL C"}) {
    INFO(line);
    const auto field = read("T1 {value} {prefix} {unit}", line);
    REQUIRE(field.has_value());
    CHECK(field->quality == Quality::overload);
    CHECK(field->value == 0.0);
  }
}

TEST_CASE("a turned knob shows as another unit, an unknown unit as invalid") {
  const auto turned = read("{value} {unit}", "113.4 F");
  REQUIRE(turned.has_value());
  CHECK(turned->quality == Quality::unit_changed);
  const auto unknown = read("{value} {unit}", "113.4 furlong");
  REQUIRE(unknown.has_value());
  CHECK(unknown->quality == Quality::invalid);
  CHECK(unknown->why == "'furlong' is not a known unit");
}

TEST_CASE("lines cut at either end do not look like the pattern") {
  for (const auto* line : {"", "T", "T1 heatsink", "T1 heatsink 45.2", "heatsink 45.2 C",
                           "T1 heatsink 45.T1 heatsink 4", "T1 heatsink C", "T1 heatsink 4\x01.2 C"}) {
    INFO(line);
    CHECK_FALSE(read("T1 heatsink {value} {unit}", line));
  }
}

TEST_CASE("patterns that cannot work are refused with the place and what would be right") {
  const auto refusal = [](std::string_view pattern) { return LinePattern::parse(pattern).refusal().text(); };
  CHECK(refusal("T1 {volts}") ==
        "column 4: {volts} is not a place of a pattern; there are {value}, {unit}, {prefix}, {text} and "
        "{rest}, and "
        "{{ for a brace itself");
  CHECK(refusal("T1 {value") == "column 4: this brace does not end");
  CHECK(refusal("T1") == "a pattern needs {value} exactly once");
  CHECK(refusal("") == "a pattern needs {value} exactly once");
  CHECK(refusal("{value} {value}") == "a pattern needs {value} exactly once");
  CHECK(refusal("{value} {unit}{unit}") == "{unit} and {prefix} may stand once");
  CHECK(refusal("{unit}{prefix}{value}") == "{prefix} must stand before {unit}");
  CHECK(refusal("{value}{prefix}") == "{prefix} needs {unit} after it");
  CHECK(refusal("{rest}{value}") == "{rest} may stand at the end only");
}
