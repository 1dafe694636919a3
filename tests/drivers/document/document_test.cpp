#include "drivers/document/document.h"

#include <catch2/catch.hpp>
#include <chrono>
#include <nlohmann/json.hpp>

namespace loadstair::document {
namespace {

std::string refusal_of(std::string_view text) {
  const auto read = parse(text, "f");
  return read ? "read" : read.refusal().text();
}

TEST_CASE("values and keys know their line and column, counted in characters") {
  const auto read = parse("// head\n{\n  \"Ω ist\": [1,\n\t\"zwei\"], \"b\": true }", "f");
  REQUIRE(read);
  CHECK(read->place == Place{2, 1});
  REQUIRE(read->members.size() == 2);
  CHECK(read->members[0].place == Place{3, 3});
  CHECK(read->members[0].value.place == Place{3, 12});
  CHECK(read->members[0].value.items[0].place == Place{3, 13});
  CHECK(read->members[0].value.items[1].place == Place{4, 2});
  CHECK(read->members[1].place == Place{4, 11});
  CHECK(read->members[1].value.boolean);
}

TEST_CASE("what is valid reads as another JSON reader reads it") {
  // nlohmann_json as the outside opinion; it skips // comments too when told so.
  const std::string text = R"(// top
    {"numbers": [0, -0.5, 1e-3, 10E6, 123456.789], // mid
     "texts": ["", "\u00b0C", "\ud83d\ude00", "a\"b\\c\/d\n"], "deep": {"a": {"b": [[], {}]}},
     "words": [true, false, null]})";
  const auto read = parse(text, "f");
  REQUIRE(read);
  CHECK(nlohmann::json::parse(print(*read)) == nlohmann::json::parse(text, nullptr, true, true));
}

TEST_CASE("each offence is refused at its place with what would be right") {
  CHECK(refusal_of("") == "f:1:1: the file holds nothing; write an object: { ... }");
  CHECK(refusal_of("{\"a\": 1,\n \"a\": 2}") ==
        "f:2:2: the key \"a\" stands twice in one object, first in line 1; remove one of them");
  CHECK(refusal_of("{\"a\": 1,}") == "f:1:8: a comma stands before the closing }; remove the comma");
  CHECK(refusal_of("[1,\n 2, // last\n]") == "f:2:3: a comma stands before the closing ]; remove the comma");
  CHECK(refusal_of("[1\n 2]") == "f:1:3: a comma or ] is missing here, before '2'");
  CHECK(refusal_of("{\"a\" 1}") == "f:1:5: a colon is missing after the key \"a\"");
  CHECK(refusal_of("{\"a\": }") == "f:1:7: the key \"a\" has no value; write one after the colon");
  CHECK(refusal_of("{a: 1}") == "f:1:2: the key a must stand in double quotes: \"a\"");
  CHECK(refusal_of("{\"a\": ['x']}") == "f:1:8: texts stand in double quotes: \"...\"");
  CHECK(refusal_of("{\"a\": volts}") == "f:1:7: volts is no value; texts stand in double quotes: \"volts\"");
  CHECK(refusal_of("{\"a\": NaN}") == "f:1:7: NaN is not a number; leave the key out where nothing is known");
  CHECK(refusal_of("[.5]") == "f:1:2: a digit is missing before the decimal point; write 0.5, not .5");
  CHECK(refusal_of("[5.]") == "f:1:4: a digit is missing after the decimal point; write 5.0, not 5.");
  CHECK(refusal_of("[+5]") == "f:1:2: numbers have no leading +; leave it out");
  CHECK(refusal_of("[007]") == "f:1:2: numbers have no leading zeros; remove the 0");
  CHECK(refusal_of("[5V]") ==
        "f:1:3: a number ends where V begins; units belong to the key, not to the number");
  CHECK(refusal_of("[0,5 1e]") == "f:1:5: a comma or ] is missing here, before '1'");
  CHECK(refusal_of("[1e]") == "f:1:4: the exponent has no digits; write 1e6");
  CHECK(refusal_of("[1e999]") == "f:1:2: the number 1e999 is too large to be held");
  CHECK(refusal_of("[\"a\nb\"]") == "f:1:2: this text does not end in its line; close it with \"");
  CHECK(refusal_of("[\"C:\\x\"]") ==
        "f:1:5: a backslash begins no known escape here; write \\\\ for a backslash itself");
  CHECK(refusal_of("[\"\\ud800\"]") ==
        "f:1:3: half of a surrogate pair stands alone; write the character itself");
  CHECK(refusal_of("[\"\\u0000\"]") == "f:1:3: the character U+0000 is not allowed in a text");
  CHECK(refusal_of("[1, /* no */ 2]") == "f:1:5: comments begin with // and end with the line");
  CHECK(refusal_of("{\"a\": [1, 2}") == "f:1:12: a comma or ] is missing here, before '}'");
  CHECK(refusal_of("{\n \"a\": [1,\n 2") == "f:2:7: the list that begins here is never closed; add ]");
  CHECK(refusal_of("{\"a\": 1") == "f:1:1: the object that begins here is never closed; add }");
  CHECK(
      refusal_of("{} {}") ==
      "f:1:4: there is more after the end of the document: '{'; remove it, or remove the bracket that closes "
      "too early");
  CHECK(refusal_of("{\n\"\xc2\xb5\": \"a\xff\"}") ==
        "f:2:8: a byte here is not UTF-8; save the file as UTF-8");
  CHECK(refusal_of("// \xc0\xaf") == "f:1:4: a byte here is not UTF-8; save the file as UTF-8");
  CHECK(refusal_of(std::string(65, '[')) == "f:1:65: lists and objects are nested deeper than 64 levels");
}

TEST_CASE("ill-formed UTF-8 of every kind of table 3-7 is refused, well-formed is read") {
  // The Unicode Standard 15.0, table 3-7: the ends of each row, and what lies just outside.
  for (const char* good : {"\xC2\x80", "\xDF\xBF", "\xE0\xA0\x80", "\xED\x9F\xBF", "\xEE\x80\x80",
                           "\xF0\x90\x80\x80", "\xF4\x8F\xBF\xBF"}) {
    CHECK(parse("\"" + std::string{good} + "\"", "f"));
  }
  for (const char* bad : {"\x80", "\xC1\xBF", "\xE0\x9F\xBF", "\xED\xA0\x80", "\xF0\x8F\xBF\xBF",
                          "\xF4\x90\x80\x80", "\xF5\x80\x80\x80", "\xE2\x82", "\xC3"}) {
    CHECK_FALSE(parse("\"" + std::string{bad} + "\"", "f"));
  }
}

TEST_CASE("a value is replaced and every other byte stays") {
  const std::string text =
      "{\n  // wired on Monday\n  \"channels\": [\n    {\"name\": \"in/out\", \"low\":  1.50 }, // odd\n"
      "    {\"name\": \"b\"}\n  ]\n}\n";
  const auto edited = replace_value(text, "channels/in~1out/low", "2.5");
  REQUIRE(edited);
  CHECK(*edited ==
        "{\n  // wired on Monday\n  \"channels\": [\n    {\"name\": \"in/out\", \"low\":  2.5 }, // odd\n"
        "    {\"name\": \"b\"}\n  ]\n}\n");
  const auto by_index = replace_value(text, "/channels/1/name", "// new\n \"c\" // tail");
  REQUIRE(by_index);
  CHECK(by_index->find("{\"name\": \"c\"}\n") != std::string::npos);
  CHECK(replace_value(text, "channels/7/name", "1").refusal().text() ==
        "channels/7/name: nothing stands at this path; only what is there can be replaced");
  CHECK(replace_value(text, "channels/b/name", "{").refusal().place == "the new value:1:1");
  CHECK(replace_value(text, "channels/b/name", "1 2").refusal().place == "the new value:1:3");
}

TEST_CASE("a long single line is read in one pass") {
  // 600 000 values in one line: counting columns from the line's begin each time would take minutes.
  std::string text = "[0";
  for (int i = 0; i < 600'000; ++i) text += ",1";
  text += "]";
  const auto begin = std::chrono::steady_clock::now();
  const auto read = parse(text, "f");
  REQUIRE(read);
  CHECK(read->items.back().place == Place{1, 2 + 2 * 600'000});
  CHECK(std::chrono::steady_clock::now() - begin < std::chrono::seconds{20});
}

}  // namespace
}  // namespace loadstair::document
