#include <catch2/catch.hpp>
#include <filesystem>
#include <fstream>

#include "daemon/setup/hookup.h"
#include "daemon/setup/profile_file.h"
#include "drivers/dialect/text_line.h"

namespace loadstair::setup {
namespace {

// The first of the profile's values whose pattern the line fits, and what was read.
std::pair<std::string, dialect::Field> hear(const std::string& profile_name, const std::string& line) {
  const auto profile = find_profile(profile_name, "x");
  REQUIRE(profile);
  const dialect::NumberRules rules{profile->overload_words, profile->overload_at};
  for (const auto& value : profile->values) {
    const auto pattern = dialect::LinePattern::parse(value.line_pattern);
    REQUIRE(pattern);
    if (const auto field = pattern->read(line, value.unit, rules)) return {value.name, *field};
  }
  return {"", {}};
}

TEST_CASE("the built-in listeners understand the lines that docs/files.md says they do") {
  const auto [reading, millivolts] = hear("text-line", "+16.3215 mV DC");
  CHECK(reading == "reading");
  CHECK(millivolts.quality == dialect::Quality::good);
  CHECK(millivolts.value == Approx(0.0163215));
  CHECK(hear("text-line", "OL mV DC").second.quality == dialect::Quality::overload);
  CHECK(hear("text-line-current", "+19.8712 A DC").second.value == Approx(19.8712));
  CHECK(hear("thermocouple-lines", "T1 +45.3 C").first == "T1");
  CHECK(hear("thermocouple-lines", "T4 +23.1 C").first == "T4");
  CHECK(hear("thermocouple-lines", "T4 +23.1 C").second.value == Approx(23.1));
  CHECK(hear("thermocouple-lines", "T2 OPEN").first == "T2");
  CHECK(hear("thermocouple-lines", "T2 OPEN").second.quality == dialect::Quality::overload);
}

TEST_CASE("a meter turned to another function is not taken for volts DC") {
  CHECK(hear("text-line", "+16.3215 mV AC").first.empty());
  CHECK(hear("text-line", "+1.2 kohm DC").second.quality == dialect::Quality::unit_changed);
}

TEST_CASE("a profile beside the hook-up file is found there and kept as text") {
  const auto folder = std::filesystem::temp_directory_path() / "loadstair_profile_test";
  std::filesystem::create_directories(folder);
  const std::string text = R"({"format": 1, "profile": "panel", "dialect": "text-lines", "terminator": "\r\n",
    "values": [{"name": "reading", "unit": "V", "line_pattern": "{value} {unit}"}]})";
  std::ofstream{folder / "panel.profile.json"} << text;
  const auto profile = find_profile("panel.profile.json", (folder / "bench.hookup.json").string());
  REQUIRE(profile);
  CHECK(profile->name == "panel");
  CHECK(profile->text == text);
  CHECK(profile->terminator == "\r\n");
  CHECK(profile->identity_query.empty());
  CHECK(profile->dialect == instrument::Dialect::text_lines);
  std::filesystem::remove_all(folder);
}

TEST_CASE("relative paths belong to the file they stand in") {
  CHECK(beside("/bench/a.hookup.json", "scope") == "/bench/scope");
  CHECK(beside("/bench/a.hookup.json", "/dev/ttyS0") == "/dev/ttyS0");
  CHECK(beside("a.hookup.json", "scope") == "scope");
}

}  // namespace
}  // namespace loadstair::setup
