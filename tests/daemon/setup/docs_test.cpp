// docs/files.md describes every key that the readers accept, and no other; its examples are read by the
// readers.
#include <catch2/catch.hpp>
#include <filesystem>
#include <fstream>
#include <map>
#include <regex>
#include <set>
#include <sstream>
#include <string>

#include "daemon/setup/forms.h"
#include "daemon/setup/profile_file.h"

namespace loadstair::setup {
namespace {

std::string docs() {
  std::ifstream file{LOADSTAIR_SOURCE "/docs/files.md", std::ios::binary};
  std::ostringstream text;
  text << file.rdbuf();
  return text.str();
}

// "## A channel" -> the keys in the first column of the tables up to the next heading.
std::map<std::string, std::set<std::string>> documented() {
  std::map<std::string, std::set<std::string>> keys;
  std::istringstream lines{docs()};
  std::string section;
  const std::regex row{R"(^\| `([a-z_0-9]+)` \|.*)"};
  for (std::string line; std::getline(lines, line);) {
    std::smatch match;
    if (line.starts_with("#")) section = line.substr(line.find(' ') + 1);
    if (std::regex_match(line, match, row)) keys[section].insert(match[1]);
  }
  return keys;
}

TEST_CASE("docs/files.md has every key of every object, and no key too many") {
  const auto described = documented();
  std::set<std::string> forms;
  for (const auto* form : all_forms()) {
    std::string heading{form->name};
    heading[0] = 'A';
    forms.insert(heading);
    INFO(heading);
    const auto at = described.find(heading);
    REQUIRE(at != described.end());
    CHECK(at->second == std::set<std::string>(form->keys.begin(), form->keys.end()));
  }
  for (const auto& [heading, keys] : described) {
    INFO("docs/files.md describes keys under the heading: " << heading);
    CHECK(forms.count(heading) == 1);
  }
}

TEST_CASE("the examples of docs/files.md can be read, and hold known keys only") {
  const std::string text = docs();
  const std::regex block{"```json\n([^`]*)```"};
  std::size_t examples = 0;
  for (std::sregex_iterator at{text.begin(), text.end(), block}, end; at != end; ++at) {
    std::string example = (*at)[1];
    if (example.starts_with("\"")) example = "{" + example + "}";
    INFO(example);
    const auto read = document::parse(example, "example");
    INFO((read ? "" : read.refusal().text()));
    REQUIRE(read);
    ++examples;
    if (read->find("profile") != nullptr && read->find("dialect") != nullptr) {
      const auto profile = read_profile(example, "example");
      INFO((profile ? "" : profile.refusal().text()));
      CHECK(profile.ok());
    }
    const auto fits = [&](const document::Form* form) {
      document::Problem problem{"example"};
      const document::ObjectReader reader{*read, *form, problem};
      return !problem.found();
    };
    const auto forms = all_forms();
    CHECK(std::any_of(forms.begin(), forms.end(), fits));
  }
  CHECK(examples >= 6);
}

TEST_CASE("every limit table stands in docs/files.md") {
  const std::string text = docs();
  std::size_t tables = 0;
  for (const auto& entry : std::filesystem::directory_iterator{LOADSTAIR_SOURCE "/analysis/limits/tables"}) {
    if (entry.path().extension() != ".csv" || entry.path().stem() == "index") continue;
    INFO(entry.path().stem());
    CHECK(text.find("`" + entry.path().stem().string() + "`") != std::string::npos);
    ++tables;
  }
  CHECK(tables >= 3);
}

TEST_CASE("every built-in profile, its queries and its commands stand in docs/files.md") {
  const std::string text = docs();
  for (const auto name : built_in_profile_names()) {
    const auto profile = find_profile(std::string{name}, "x");
    REQUIRE(profile);
    INFO(name);
    CHECK(text.find("| `" + std::string{name} + "` |") != std::string::npos);
    for (const auto& query : profile->queries) {
      INFO(query.text);
      CHECK(text.find("`" + query.text + "`") != std::string::npos);
    }
    for (const auto& setting : profile->settings) {
      INFO(setting.command);
      CHECK(text.find("`" + setting.command.substr(0, setting.command.find('{'))) != std::string::npos);
      CHECK(text.find("`" + setting.readback + "`") != std::string::npos);
    }
    for (const auto& command : profile->on_commands)
      CHECK(text.find("`" + command + "`") != std::string::npos);
    if (profile->safe) CHECK(text.find("`" + profile->safe->confirm_query + "`") != std::string::npos);
  }
}

}  // namespace
}  // namespace loadstair::setup
