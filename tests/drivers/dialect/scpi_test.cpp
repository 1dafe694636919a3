#include "drivers/dialect/scpi.h"

#include <catch2/catch.hpp>
#include <limits>
#include <random>

#include "analysis/base/number.h"

namespace {

using namespace loadstair::dialect;

const NumberRules kRules{{"OL", "0L", "----"}, 9.9e37};

}  // namespace

TEST_CASE("a number may carry its unit, and a prefix scales it") {
  const auto plain = read_field("  +3.85012E+02 ", "V", kRules);
  CHECK(plain == Field{Quality::good, 385.012, "V", ""});
  CHECK(read_field("385.012 V", "V", kRules).value == 385.012);
  CHECK(read_field("12.5mV", "V", kRules).value == 12.5 * 1e-3);
  CHECK(read_field("12.5", "mV", kRules).value == 12.5 * 1e-3);
  CHECK(read_field("12.5 V", "mV", kRules).value == 12.5);
  CHECK(read_field("0.4 \xc2\xb5"
                   "A",
                   "A", kRules)
            .value == 0.4 * 1e-6);
}

TEST_CASE("another unit than the profile's is flagged and keeps its number") {
  const auto field = read_field("1.25 A", "V", kRules);
  CHECK(field.quality == Quality::unit_changed);
  CHECK(field.value == 1.25);
  CHECK(field.unit == "A");
  CHECK(field.why == "unit A instead of V");
}

TEST_CASE("overload is told by the instrument's words, with sign or in another case, or by a large number") {
  for (const auto* text :
       {"OL", "ol", "-OL", "+ OL", "0L", "----", "9.9E37", "-9.90000000E+37", "1E38", "OL V"}) {
    INFO(text);
    CHECK(read_field(text, "V", kRules).quality == Quality::overload);
  }
  CHECK(read_field("9.9E37", "mV", kRules).quality ==
        Quality::overload);  // judged as written, before any prefix
  CHECK(read_field("1200", "V", {{}, 1000.0}).quality == Quality::overload);
  CHECK(read_field("OLIVE", "V", kRules).quality == Quality::invalid);
  CHECK(read_field("OL", "V", {}).quality == Quality::invalid);
}

TEST_CASE("garbage is invalid, never a number, and the reason can be shown on a terminal") {
  for (const auto* text : {"", " ", "3.85E", "3.85E+", "3,85", "3.8.5", "VOLT 3", "12 12", "0.98 1", "nan",
                           "inf", "0x1F", "1e999", "\x1b[31m5", "#H", "#HXYZ", "#B2", "--5"}) {
    INFO(text);
    const auto field = read_field(text, "1", kRules);
    CHECK(field.quality == Quality::invalid);
    CHECK(field.value == 0.0);
    CHECK_FALSE(field.why.empty());
    CHECK(field.why.find('\x1b') == std::string::npos);
  }
}

TEST_CASE("a reply with several values is read only when their number is right") {
  const std::vector<std::string> units{"V", "A", "W"};
  const auto fields = read_reply("+1.20E+01, +2.0E+00 ,OL", units, kRules);
  REQUIRE(fields.size() == 3);
  CHECK(fields[0].value == 12.0);
  CHECK(fields[1].value == 2.0);
  CHECK(fields[2].quality == Quality::overload);
  CHECK(read_reply("1;2;3", units, kRules)[2].value == 3.0);
  for (const auto* text : {"", "1,2", "1,2,3,4", "1,2,", "1 2 3"}) {
    INFO(text);
    for (const auto& field : read_reply(text, units, kRules)) {
      const bool missing_one = std::string_view{text} == "1,2,";  // three elements, the last one empty
      if (!missing_one) CHECK(field.quality == Quality::invalid);
    }
  }
  CHECK(read_reply("1,2", units, kRules)[0].why == "2 values instead of 3");
  CHECK(read_reply("1,2,", units, kRules)[2].quality == Quality::invalid);
}

TEST_CASE("strings lose their quotes; broken ones are refused") {
  CHECK(*read_string("\"No error\"") == "No error");
  CHECK(*read_string(" 'it''s \"here\"' ") == "it's \"here\"");
  CHECK(*read_string("\"\"") == "");
  for (const auto* text : {"", "abc", "\"abc", "\"abc\" d", "'a'b'"}) CHECK_FALSE(read_string(text).ok());
}

TEST_CASE("identities that are none are refused") {
  CHECK(read_identity("bench,meter,N-001").refusal().text() ==
        "3 fields instead of manufacturer, model, serial number and firmware");
  CHECK_FALSE(read_identity("").ok());
  CHECK_FALSE(read_identity("a,b,c,d\x07").ok());
  CHECK(read_identity("a , b,0, 1.0 ").value() == Identity{"a", "b", "", "1.0"});
}

TEST_CASE("a command carries its number in plain notation where that is exact") {
  CHECK(*write_command("POW {value}", 385.1) == "POW 385.1");
  CHECK(*write_command("OUTP {value}", 1) == "OUTP 1");
  CHECK(*write_command("VOLT {value}", 100000) == "VOLT 100000");
  CHECK(*write_command("CURR {value}", -0.0) == "CURR 0");
  CHECK(*write_command("CURR {value}", 1e-12) == "CURR 1e-12");
  CHECK(*write_command("FUNC:POW {value};LIM {value}", 0.5) == "FUNC:POW 0.5;LIM 0.5");
  CHECK(*write_command("INP OFF", 3) == "INP OFF");
  CHECK_FALSE(write_command("POW {value}", std::numeric_limits<double>::infinity()).ok());
}

TEST_CASE("any finite number that a command carries reads back to the same double") {
  const auto seed = std::random_device{}();
  INFO("seed " << seed);
  std::mt19937_64 engine{seed};
  for (int i = 0; i < 5000; ++i) {
    const double digits = static_cast<double>(static_cast<std::int64_t>(engine() % 2'000'001) - 1'000'000);
    const double scales[] = {1e-9, 1e-6, 1e-3, 1.0, 1e3, 1e9, 1e20};
    const double value = digits * scales[engine() % 7];
    const auto command = write_command("X {value}", value);
    REQUIRE(command.ok());
    REQUIRE(loadstair::base::parse_number(command->substr(2)) == value);
  }
}

TEST_CASE("the shape of a number tells a reply that was cut short from a whole one") {
  const auto whole = shape_of("+3.85012E+02");
  CHECK(whole == shape_of(" -9.99120E-01"));
  for (const auto* cut : {"+3.85012E+0", "+3.85012", "+3.8501", "+3", "+3."}) {
    INFO(cut);
    CHECK(shape_of(cut) != whole);
  }
  CHECK(shape_of("385.10") == shape_of("- 5.11"));
  CHECK(shape_of("385") != shape_of("385."));
}
