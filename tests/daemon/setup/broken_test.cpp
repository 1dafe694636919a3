// Files that are wrong, each in its own way, and the exact words they are refused with:
// tests/broken/*/expected.txt, one line a file, "name TAB place: reason". The words were read as a user
// would; change them on purpose only.
#include <catch2/catch.hpp>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <map>
#include <regex>
#include <set>
#include <string>

#include "daemon/setup/hookup.h"
#include "daemon/setup/profile_file.h"
#include "daemon/setup/stair.h"

namespace loadstair::setup {
namespace {

const std::string kBroken = LOADSTAIR_SOURCE "/tests/broken/";

std::string text_of(const std::string& path) {
  std::ifstream file{path, std::ios::binary};
  return {std::istreambuf_iterator<char>{file}, std::istreambuf_iterator<char>{}};
}

std::map<std::string, std::string> expected_in(const std::string& folder) {
  std::map<std::string, std::string> expected;
  std::ifstream table{folder + "expected.txt"};
  for (std::string line; std::getline(table, line);) {
    const auto tab = line.find('\t');
    if (tab != std::string::npos) expected[line.substr(0, tab)] = line.substr(tab + 1);
  }
  return expected;
}

// The folder of this tree says nothing about the file.
std::string without_folder(std::string text, const std::string& folder) {
  for (auto at = text.find(folder); at != std::string::npos; at = text.find(folder))
    text.erase(at, folder.size());
  return text;
}

std::string refusal_of_hookup(const std::string& path) {
  const auto read = load_hookup(path);
  return read ? "read without complaint" : read.refusal().text();
}

std::string refusal_of_stair(const std::string& path) {
  const auto read = load_stair(path);
  if (!read) return read.refusal().text();
  const auto bench = load_hookup(kBroken + "stair/bench.hookup.json");
  REQUIRE(bench);
  const auto matched = match(*read, *bench);
  return matched ? "read without complaint" : matched.refusal().text();
}

std::string refusal_of_profile(const std::string& path) {
  const auto read = read_profile(text_of(path), path);
  return read ? "read without complaint" : read.refusal().text();
}

// Every file of the folder with the suffix against its line of the table; returns the messages.
template <class Refuse>
std::set<std::string> compare(const std::string& kind, const std::string& suffix, Refuse refuse) {
  const std::string folder = kBroken + kind + "/";
  const auto expected = expected_in(folder);
  std::set<std::string> reasons;
  std::size_t files = 0;
  for (const auto& entry : std::filesystem::directory_iterator{folder}) {
    const std::string name = entry.path().filename().string();
    if (!name.ends_with(suffix)) continue;
    ++files;
    INFO(kind << "/" << name);
    const std::string got = without_folder(refuse(entry.path().string()), folder);
    const auto wanted = expected.find(name);
    CHECK(got == (wanted == expected.end() ? "no line in expected.txt" : wanted->second));
    // "file:line:column: reason"; a place in each, and a remedy after a semicolon or in the sentence.
    if (name.starts_with("sound.")) continue;
    CHECK(std::regex_search(got, std::regex{R"(^[a-z_0-9.]+\.json:[0-9]+:[0-9]+: .{20})"}));
    reasons.insert(got.substr(got.find(": ")));
  }
  CHECK(files == expected.size());
  return reasons;
}

TEST_CASE("broken hook-up files are refused with place and remedy") {
  CHECK(compare("hookup", ".hookup.json", refusal_of_hookup).size() >= 50);
}

TEST_CASE("broken stair files are refused with place and remedy") {
  CHECK(compare("stair", ".stair.json", refusal_of_stair).size() >= 25);
}

TEST_CASE("broken profiles are refused with place and remedy") {
  CHECK(compare("profile", ".profile.json", refusal_of_profile).size() >= 12);
}

TEST_CASE("a file that is not there is refused by name") {
  CHECK(load_hookup("no/such.hookup.json").refusal().text() ==
        "no/such.hookup.json: the hook-up file cannot be opened: No such file or directory; check the path");
  CHECK(load_stair(LOADSTAIR_SOURCE).refusal().reason.find("is it a file, and not a folder?") !=
        std::string::npos);
}

}  // namespace
}  // namespace loadstair::setup
