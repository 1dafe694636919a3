#include "drivers/document/reader.h"

#include <catch2/catch.hpp>

namespace loadstair::document {
namespace {

constexpr std::array<std::string_view, 5> kKeys = {"name", "poll_s", "kind", "counts", "live"};
constexpr Form kForm{"an instrument", kKeys};
constexpr std::array kKinds = {Choice<int>{"dc", 1}, Choice<int>{"ac", 2}, Choice<int>{"both", 3}};

template <class Read>
std::string complaint(std::string_view text, Read read) {
  const auto document = parse(text, "f");
  REQUIRE(document);
  Problem problem{"f"};
  ObjectReader reader{*document, kForm, problem};
  read(reader);
  return problem.found() ? problem.refusal().text() : "";
}

TEST_CASE("getters give what is written, and what is meant by leaving out") {
  const std::string text =
      R"({"name": "meter", "poll_s": 0.5, "kind": "ac", "counts": [1, 2], "live": true})";
  CHECK(complaint(text, [](ObjectReader& r) {
          CHECK(r.text("name", "") == "meter");
          CHECK(r.number("poll_s", kPositive, "") == 0.5);
          CHECK(r.one_of<int>("kind", kKinds) == 2);
          CHECK(r.numbers_or_empty("counts", kPositive) == std::vector<double>{1, 2});
          CHECK(r.maybe_flag("live") == true);
        }) == "");
  CHECK(complaint("{}", [](ObjectReader& r) {
          CHECK(r.text_or("name", "none") == "none");
          CHECK(r.number_or("poll_s", kPositive, 1.0) == 1.0);
          CHECK(r.one_of<int>("kind", kKinds, 3) == 3);
          CHECK_FALSE(r.maybe_flag("live").has_value());
          CHECK(r.integer_or("counts", 0, 9, 7) == 7);
        }) == "");
}

TEST_CASE("complaints name the place, what came, and what would be right") {
  const auto none = [](ObjectReader&) {};
  CHECK(complaint(R"({"pol_s": 1})", none) ==
        "f:1:2: unknown key \"pol_s\" in an instrument; did you mean \"poll_s\"?");
  CHECK(complaint(R"({"nmae": 1})", none) ==
        "f:1:2: unknown key \"nmae\" in an instrument; did you mean \"name\"?");
  CHECK(complaint(R"({"voltage_range": 1})", none) ==
        "f:1:2: unknown key \"voltage_range\" in an instrument; known are \"name\", \"poll_s\", \"kind\", "
        "\"counts\", \"live\"");
  CHECK(complaint("[]", none) == "f:1:1: an instrument is an object {...}, not a list [...]");
  CHECK(complaint("{}", [](ObjectReader& r) { (void)r.text("name", "\"name\": \"shunt meter\""); }) ==
        "f:1:1: an instrument needs \"name\"; add, for example, \"name\": \"shunt meter\"");
  CHECK(complaint(R"({"poll_s": "1"})", [](ObjectReader& r) { (void)r.number_or("poll_s", kPositive, 1); }) ==
        "f:1:12: \"poll_s\" must be a number, not \"1\"");
  CHECK(complaint(R"({"poll_s": 0})", [](ObjectReader& r) { (void)r.number_or("poll_s", kPositive, 1); }) ==
        "f:1:12: \"poll_s\" is 0; it must be greater than 0 seconds");
  CHECK(complaint(R"({"poll_s": 10e6})", [](ObjectReader& r) {
          (void)r.number_or("poll_s", {0, 3600, true}, 1);
        }) == "f:1:12: \"poll_s\" is 10e6; it must be above 0 and at most 3600 seconds");
  CHECK(complaint(R"({"poll_s": 1.5})", [](ObjectReader& r) { (void)r.integer_or("poll_s", 0, 9, 1); }) ==
        "f:1:12: \"poll_s\" is 1.5; it must be a whole number");
  CHECK(complaint(R"({"kind": "DC"})", [](ObjectReader& r) { (void)r.one_of<int>("kind", kKinds); }) ==
        "f:1:10: \"kind\" is \"DC\"; it must be dc, ac or both");
  CHECK(complaint(R"({})", [](ObjectReader& r) { (void)r.one_of<int>("kind", kKinds); }) ==
        "f:1:1: an instrument needs \"kind\": dc, ac or both");
  CHECK(complaint(R"({"counts": [1, "2"]})", [](ObjectReader& r) {
          (void)r.numbers_or_empty("counts", kPositive);
        }) == "f:1:16: \"counts\" is a list of numbers; this is \"2\"");
}

TEST_CASE("the first problem is kept") {
  CHECK(complaint(R"({"poll_s": 0, "live": 1})", [](ObjectReader& r) {
          (void)r.number_or("poll_s", kPositive, 1);
          (void)r.flag_or("live", false);
        }) == "f:1:12: \"poll_s\" is 0; it must be greater than 0 seconds");
}

TEST_CASE("asking for a key outside the form is a broken promise of our own") {
  CHECK_THROWS_AS(complaint("{}", [](ObjectReader& r) { (void)r.has("colour"); }), base::BrokenPromise);
}

TEST_CASE("the nearest word is near") {
  const std::array<std::string_view, 3> words = {"resistance_ohm", "tolerance_percent", "ac"};
  CHECK(nearest("resistence_ohm", words) == "resistance_ohm");
  CHECK(nearest("tolerance_percnet", words) == "tolerance_percent");
  CHECK_FALSE(nearest("x", words).has_value());
  CHECK_FALSE(nearest("", words).has_value());
}

}  // namespace
}  // namespace loadstair::document
