// IEEE 488.2-1992 and SCPI-1999; see SOURCE.md.
#include <catch2/catch.hpp>
#include <fstream>
#include <nlohmann/json.hpp>
#include <string>
#include <vector>

#include "drivers/dialect/scpi.h"

namespace {

using namespace loadstair::dialect;
using nlohmann::json;

json published() {
  std::ifstream in{LOADSTAIR_SOURCE "/tests/published/scpi/formats.json"};
  return json::parse(in);
}

Field read(const json& text) {
  return read_field(text.get<std::string>(), "", {});
}

}  // namespace

TEST_CASE("IEEE 488.2: every valid NR1, NR2 and NR3 is read, and what tolerant readers should accept") {
  const auto formats = published().at("numeric_response_formats");
  std::size_t checked = 0;
  for (const auto* form : {"NR1", "NR2", "NR3"}) {
    for (const auto& text : formats.at(form).at("valid")) {
      INFO(text);
      CHECK(read(text).quality == Quality::good);
      ++checked;
    }
  }
  for (const auto& text : formats.at("NR3").at("tolerant_reader_should_accept_but_not_strict_NR3")) {
    INFO(text);
    CHECK(read(text).quality == Quality::good);
    ++checked;
  }
  CHECK(checked == 17);
}

TEST_CASE("IEEE 488.2: what is no number in any form is invalid") {
  for (const auto* text : {"", "+", "0x10", "1.2.3"}) {  // of the lists invalid_as_NR1 and invalid_as_NR2
    INFO(text);
    CHECK(read_field(text, "", {}).quality == Quality::invalid);
  }
}

TEST_CASE("IEEE 488.2: the digits mean what they say, decimal and not") {
  const auto formats = published().at("numeric_response_formats");
  for (const auto* list : {"decode", "nondecimal"}) {
    for (const auto& row : formats.at(list)) {
      INFO(row);
      const auto values = row.contains("values") ? row.at("values").get<std::vector<double>>()
                                                 : std::vector{row.at("value").get<double>()};
      const auto fields =
          read_reply(row.at("text").get<std::string>(), std::vector<std::string>(values.size(), ""), {});
      REQUIRE(fields.size() == values.size());
      for (std::size_t i = 0; i < values.size(); ++i) {
        CHECK(fields[i].quality == Quality::good);
        CHECK(fields[i].value == values[i]);  // both nearest doubles of the same decimal digits
      }
    }
  }
}

TEST_CASE("SCPI-1999: infinities and not-a-number are never values, their neighbour is") {
  const auto special = published().at("special_numbers");
  std::size_t checked = 0;
  for (const auto& row : special.at("examples")) {
    INFO(row);
    const auto meaning = row.at("meaning").get<std::string>();
    const auto wanted = meaning.starts_with("not a number") ? Quality::not_a_number
                        : meaning == "an ordinary number"   ? Quality::good
                                                            : Quality::overload;
    const auto field = read(row.at("text"));
    CHECK(field.quality == wanted);
    CHECK((field.value != 0.0) == (wanted == Quality::good));
    ++checked;
  }
  CHECK(checked == 5);
  // The binary32 neighbours named in the rule, printed by an instrument that computes in single precision.
  CHECK(read_field("9.900000302096328e+37", "V", {}).quality == Quality::overload);
  CHECK(read_field("9.909999530030929e+37", "V", {}).quality == Quality::not_a_number);
}

TEST_CASE("IEEE 488.2: identification has four fields; 0 means not known") {
  const auto file = published();
  for (const auto& row : file.at("identification").at("examples")) {
    const auto identity = read_identity(row.at("text").get<std::string>());
    REQUIRE(identity.ok());
    const auto fields = row.at("fields").get<std::vector<std::string>>();
    const auto known = [](const std::string& field) { return field == "0" ? std::string{} : field; };
    CHECK(*identity == Identity{fields[0], fields[1], known(fields[2]), known(fields[3])});
  }
}

TEST_CASE("IEEE 488.2: a string keeps its commas and semicolons to itself") {
  std::size_t checked = 0;
  const auto file = published();
  for (const auto& row : file.at("error_queue").at("examples")) {
    INFO(row);
    const auto text = row.at("text").get<std::string>();
    const auto elements = split_reply(text);
    REQUIRE(elements.size() == 2);
    CHECK(read_field(elements[0], "", {}).value == row.at("number").get<double>());
    const auto info = row.at("info").get<std::string>();
    const auto whole = row.at("message").get<std::string>() + (info.empty() ? "" : ";" + info);
    const auto message = read_string(elements[1]);
    REQUIRE(message.ok());
    CHECK(*message == whole);
    ++checked;
  }
  CHECK(checked == 4);
}
