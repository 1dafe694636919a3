#include "drivers/instrument/profile_check.h"

#include <catch2/catch.hpp>
#include <functional>
#include <string>

#include "tests/drivers/instrument/test_profiles.h"

namespace {

using namespace loadstair::instrument;

std::string refusal(const std::string& name, const std::function<void(Profile&)>& spoil) {
  auto profile = test_profile(name);
  spoil(profile);
  const auto outcome = check_profile(profile);
  return outcome.ok() ? "" : outcome.refusal().text();
}

}  // namespace

TEST_CASE("the profiles of these tests are sound") {
  for (const auto* name :
       {"meter", "turnable", "pair", "triple", "load", "mute load", "source", "line", "lines"}) {
    INFO(name);
    CHECK(refusal(name, [](Profile&) {}) == "");
  }
}

TEST_CASE("what would make a profile useless or unsafe is refused with its place") {
  CHECK(refusal("meter", [](Profile& p) { p.terminator.clear(); }) ==
        "terminator: lines need an end, usually \"\\n\"");
  CHECK(refusal("meter", [](Profile& p) { p.timeout_s = 0; }) == "timeout_s: a timeout is more than 0 s");
  CHECK(refusal("meter", [](Profile& p) {
          p.identity_query.clear();
        }).starts_with("identity_query: without it"));
  CHECK(refusal("pair", [](Profile& p) { p.values[1].name = "voltage"; }) ==
        "values[1].name: there are two values named \"voltage\"");
  CHECK(refusal("pair", [](Profile& p) {
          p.queries[1].values = {"", "power"};
        }) == "queries[1].values[1]: there is no value named \"power\"");
  CHECK(refusal("pair", [](Profile& p) { p.queries[0].text = "A?\nB?"; }) ==
        "queries[0].text: a query is one line of text");
  CHECK(refusal("lines", [](Profile& p) {
          p.values[1].line_pattern = "T2 {volts}";
        }).starts_with("values[1].line_pattern: column 4: {volts}"));
  CHECK(refusal("line", [](Profile& p) { p.safe = ProfileSafe{{"OFF"}, "", ""}; }).starts_with("dialect: "));
  CHECK(refusal("load", [](Profile& p) { p.settings[0].command = "POW"; }) ==
        "settings[0].command: a setting's command is one line with {value} in it");
  CHECK(refusal("load", [](Profile& p) { p.settings[0].tolerance = -1; }) ==
        "settings[0].tolerance: a tolerance is 0 or more");
  CHECK(refusal("load", [](Profile& p) { p.safe->commands.clear(); }) ==
        "safe.commands: at least one command, each one line of text");
  CHECK(refusal("load", [](Profile& p) { p.safe->confirm_reply.clear(); }) ==
        "safe.confirm_reply: say what the instrument answers when it is safe");
}
