// Nothing that a user writes may crash the program: every value of the sample files is replaced by values of
// every other kind, and every member is left out, one at a time.
#include <catch2/catch.hpp>
#include <fstream>
#include <functional>
#include <iterator>
#include <string>

#include "daemon/setup/explain.h"
#include "daemon/setup/hookup.h"
#include "daemon/setup/profile_file.h"
#include "daemon/setup/stair.h"
#include "drivers/document/document.h"

namespace loadstair::setup {
namespace {

std::string text_of(const std::string& path) {
  std::ifstream file{path, std::ios::binary};
  return {std::istreambuf_iterator<char>{file}, std::istreambuf_iterator<char>{}};
}

void visit(const document::Value& value, const std::function<void(const document::Value&)>& each) {
  each(value);
  for (const auto& item : value.items) visit(item, each);
  for (const auto& member : value.members) visit(member.value, each);
}

// Calls `read` with every changed text; it returns a refusal's place, or "" when the text was read.
std::size_t change_everything(const std::string& path,
                              const std::function<std::string(const std::string&)>& read) {
  const std::string text = text_of(path);
  const auto document = document::parse(text, "f");
  REQUIRE(document);
  std::size_t refused = 0;
  visit(*document, [&](const document::Value& value) {
    for (const auto* other : {"null", "true", "-1", "0", "1e308", "-1e-300", "2.5", "\"\"", "\"x\"",
                              "\"\\n{}\"", "[]", "{}", "[[]]", "[{}]", "{\"x\": 1}", "[\"x\"]", "[1e308]"}) {
      const std::string changed = text.substr(0, value.begin) + other + text.substr(value.end);
      INFO(path << ":" << value.place.line << ":" << value.place.column << " replaced by " << other);
      const std::string place = read(changed);
      refused += place.empty() ? 0 : 1;
      CHECK((place.empty() || place.starts_with("f:")));
    }
    for (std::size_t i = 0; i + 1 < value.members.size(); ++i) {
      const std::size_t from = value.members[i].value.begin;
      const std::size_t key = text.rfind('"' + value.members[i].name + '"', from);
      const std::size_t next = text.find('"' + value.members[i + 1].name + '"', value.members[i].value.end);
      const std::string changed = text.substr(0, key) + text.substr(next);
      INFO(path << " without " << value.members[i].name);
      const std::string place = read(changed);
      refused += place.empty() ? 0 : 1;
      CHECK((place.empty() || place.starts_with("f:")));
    }
  });
  return refused;
}

TEST_CASE("no change of one value in a hook-up file does harm") {
  for (const auto* name : {"sample-captures/north_bench.hookup.json", "sample-captures/stoat.hookup.json",
                           "tests/daemon/setup/every_key.hookup.json"}) {
    const auto refused = change_everything(LOADSTAIR_SOURCE "/" + std::string{name},
                                           [](const std::string& text) -> std::string {
                                             const auto read = read_hookup(text, "f");
                                             if (!read) return read.refusal().place;
                                             (void)explain(*read);
                                             (void)cautions(*read, nullptr);
                                             return "";
                                           });
    CHECK(refused > 1000);
  }
}

TEST_CASE("no change of one value in a stair file does harm") {
  for (const auto* pair :
       {"sample-captures/north_bench.hookup.json sample-captures/marten.stair.json",
        "sample-captures/stoat.hookup.json sample-captures/stoat.stair.json",
        "tests/daemon/setup/every_key.hookup.json tests/daemon/setup/every_key.stair.json"}) {
    const std::string both{pair};
    const std::string folder = LOADSTAIR_SOURCE "/";
    const auto bench = load_hookup(folder + both.substr(0, both.find(' ')));
    REQUIRE(bench);
    const auto refused =
        change_everything(folder + both.substr(both.find(' ') + 1), [&](const std::string& text) {
          const auto read = read_stair(text, "f");
          if (!read) return read.refusal().place;
          (void)explain(*read, &*bench);
          (void)cautions(*bench, &*read);
          const auto matched = match(*read, *bench);
          if (!matched) return matched.refusal().place;
          for (const auto& step : read->steps) {
            for (const auto& point : step.set) CHECK(std::abs(point.value) < 1e18);
          }
          for (const auto& forecast : forecast_guards(*read, *bench)) CHECK(forecast.worst_s >= 0.0);
          return std::string{};
        });
    CHECK(refused > 500);
  }
}

TEST_CASE("no change of one value in a profile does harm") {
  for (const auto* name : {"scpi-load", "scpi-power-meter", "text-line", "scope-folder"}) {
    const auto refused =
        change_everything(LOADSTAIR_SOURCE "/daemon/setup/profiles/" + std::string{name} + ".profile.json",
                          [](const std::string& text) {
                            const auto read = read_profile(text, "f");
                            return read ? std::string{} : read.refusal().place;
                          });
    CHECK(refused > 20);
  }
}

}  // namespace
}  // namespace loadstair::setup
