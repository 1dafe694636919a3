// Broken files with the exact refusal of each: tests/broken/csv and its expected.txt.
#include <catch2/catch.hpp>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <map>
#include <set>
#include <string>

#include "drivers/scope_csv/scope_csv.h"

using namespace loadstair;

namespace {

std::string content_of(const std::filesystem::path& path) {
  std::ifstream in{path, std::ios::binary};
  return {std::istreambuf_iterator<char>{in}, {}};
}

/// "file.csv:line:column: message", one file a line.
std::map<std::string, std::string> expected_refusals(const std::filesystem::path& path) {
  std::map<std::string, std::string> expected;
  std::ifstream in{path};
  for (std::string line; std::getline(in, line);) {
    if (!line.empty()) expected[line.substr(0, line.find(':'))] = line;
  }
  return expected;
}

}  // namespace

TEST_CASE("each broken scope file is refused with its place, what came and what would be right") {
  const std::filesystem::path folder = LOADSTAIR_SOURCE "/tests/broken/csv";
  const auto expected = expected_refusals(folder / "expected.txt");
  std::set<std::string> seen;
  std::set<std::string> messages;
  for (const auto& entry : std::filesystem::directory_iterator{folder}) {
    if (entry.path().extension() != ".csv") continue;
    const std::string name = entry.path().filename().string();
    INFO(name);
    seen.insert(name);
    const auto outcome = scope_csv::read_scope_csv(content_of(entry.path()), name);
    REQUIRE_FALSE(outcome.ok());
    REQUIRE(expected.count(name) == 1);
    CHECK(outcome.refusal().text() == expected.at(name));
    messages.insert(outcome.refusal().reason);
    // From the disk it is the same refusal, with the path in front.
    const auto from_disk = scope_csv::read_scope_csv_file(entry.path());
    REQUIRE_FALSE(from_disk.ok());
    CHECK(from_disk.refusal().text() == (folder / expected.at(name)).string());
  }
  CHECK(seen.size() == expected.size());
  CHECK(seen.size() >= 12);
  CHECK(messages.size() == seen.size());
}

TEST_CASE("a file that is not there, or a folder, is refused with its path") {
  const auto missing = scope_csv::read_scope_csv_file("no/such/capture.csv");
  REQUIRE_FALSE(missing.ok());
  CHECK(missing.refusal().text() == "no/such/capture.csv: cannot open the file: No such file or directory");
  const auto folder = scope_csv::read_scope_csv_file(LOADSTAIR_SOURCE "/tests");
  REQUIRE_FALSE(folder.ok());
  CHECK(folder.refusal().reason == "cannot read the file: Is a directory");
}
