// Expected values follow from the guard's own definition (daemon/setup/stair.h, Guard); no outside source
// exists.
#include "daemon/sequencer/guard_watch.h"

#include <catch2/catch.hpp>
#include <cmath>

#include "drivers/instrument/reading.h"

namespace loadstair::sequencer {
namespace {

constexpr std::int64_t kSecond = 1'000'000'000;

recorder::Point at(double t_s, double value, std::uint32_t flags = 0) {
  const auto t_ns = std::llround(t_s * 1e9);
  return {.t_ns = t_ns, .half_width_ns = 0, .arrived_ns = t_ns, .value = value, .raw = value, .flags = flags};
}

setup::Guard above(double limit, double debounce_s = 0.0, double blanking_s = 0.0) {
  setup::Guard guard;
  guard.name = "too hot";
  guard.channel = "heatsink";
  guard.above = limit;
  guard.debounce_s = debounce_s;
  guard.blanking_s = blanking_s;
  return guard;
}

TEST_CASE("a guard without debounce trips at the first reading beyond its limit, and once") {
  GuardWatch watch{above(95), "degC", 0.5};
  watch.arm(0);
  watch.see(at(0.1, 95.0));
  CHECK_FALSE(watch.check(kSecond / 10));  // at the limit is not beyond it
  CHECK(*watch.margin(kSecond / 10) == 0.0);
  watch.see(at(0.2, 95.1));
  const auto cause = watch.check(kSecond / 5);
  REQUIRE(cause);
  CHECK(cause->demand == GuardDemand::stop);
  CHECK(cause->text == "heatsink is 95.1 degC, above 95 degC");
  CHECK_FALSE(watch.check(kSecond / 5));
  CHECK(watch.standing(kSecond / 5) == GuardWatch::Standing::tripped);
}

TEST_CASE("debounce: readings stand beyond the limit for the whole time") {
  GuardWatch watch{above(95, 0.6), "degC", 0.2};
  watch.arm(0);
  SECTION("a single spike does not trip") {
    watch.see(at(0.2, 120));
    watch.see(at(0.4, 60));
    watch.see(at(0.6, 120));
    watch.see(at(1.0, 120));
    CHECK_FALSE(watch.check(kSecond));
    CHECK(watch.standing(kSecond) == GuardWatch::Standing::beyond);
  }
  SECTION("0.6 s in a row trips") {
    for (const double t : {0.2, 0.4, 0.6}) {
      watch.see(at(t, 120));
      CHECK_FALSE(watch.check(std::llround(t * 1e9)));
    }
    watch.see(at(0.8, 120));
    REQUIRE(watch.check(std::llround(0.8e9)));
  }
  SECTION("an unusable reading neither trips nor excuses") {
    watch.see(at(0.2, 120));
    watch.see(at(0.4, NAN, instrument::kInvalid));
    watch.see(at(0.6, 20, instrument::kStale));
    watch.see(at(0.8, 120));
    CHECK(watch.check(std::llround(0.8e9)));
  }
}

TEST_CASE("blanking: beyond the limit does not count after a set-point change, a missing reading does") {
  auto guard = above(95, 0.0, 1.5);
  guard.missing_after_s = 1.0;
  GuardWatch watch{guard, "degC", 0.2};
  watch.arm(0);
  watch.blank(0);
  watch.see(at(0.5, 300));
  CHECK_FALSE(watch.check(kSecond / 2));
  CHECK(watch.standing(kSecond / 2) == GuardWatch::Standing::blanked);
  SECTION("beyond after it") {
    watch.see(at(1.4, 300));
    CHECK_FALSE(watch.check(std::llround(1.4e9)));
    watch.see(at(1.6, 300));
    CHECK(watch.check(std::llround(1.6e9)));
  }
  SECTION("silent within it") {
    CHECK_FALSE(watch.check(std::llround(1.5e9)));
    const auto cause = watch.check(std::llround(1.51e9));
    REQUIRE(cause);
    CHECK(cause->text.starts_with("no usable reading of heatsink for 1.01 s"));
  }
}

TEST_CASE("a missing reading: three periods by default, and its own action") {
  using Row = std::pair<setup::MissingAction, std::optional<GuardDemand>>;
  const auto [missing, demand] = GENERATE(
      Row{setup::MissingAction::ignore, std::nullopt}, Row{setup::MissingAction::stop, GuardDemand::stop},
      Row{setup::MissingAction::hold, GuardDemand::hold}, Row{setup::MissingAction::next, GuardDemand::next});
  auto guard = above(95);
  guard.missing = missing;
  GuardWatch watch{guard, "degC", 0.5};
  watch.arm(0);
  watch.see(at(0.0, 20));
  CHECK_FALSE(watch.check(std::llround(1.5e9)));
  const auto cause = watch.check(std::llround(1.6e9));
  REQUIRE(cause.has_value() == demand.has_value());
  if (cause) CHECK(cause->demand == *demand);
  CHECK_FALSE(watch.value(std::llround(1.6e9)));
  CHECK_FALSE(watch.margin(std::llround(1.6e9)));
}

TEST_CASE("an overload towards the limit stands beyond it, whatever is said of missing readings") {
  auto guard = above(95, 0.6);
  guard.missing = GENERATE(setup::MissingAction::ignore, setup::MissingAction::stop);
  guard.action = setup::GuardAction::next;
  GuardWatch watch{guard, "degC", 0.5};
  watch.arm(0);
  watch.see(at(0.2, 40));
  SECTION("for the debounce time: it trips") {
    for (const double t : {0.4, 0.6, 0.8}) {
      watch.see(at(t, std::nan(""), instrument::kOverload));
      CHECK_FALSE(watch.check(std::llround(t * 1e9)));
    }
    CHECK(watch.standing(std::llround(0.8e9)) == GuardWatch::Standing::beyond);
    CHECK_FALSE(watch.value(std::llround(0.8e9)));
    watch.see(at(1.0, std::nan(""), instrument::kOverload));
    const auto cause = watch.check(kSecond);
    REQUIRE(cause);
    CHECK(cause->demand == GuardDemand::next);
    CHECK(cause->text == "heatsink is overloaded: beyond the meter's full scale, so above 95 degC for 0.6 s");
  }
  SECTION("for a moment, as while a meter changes its range: it does not") {
    watch.see(at(0.4, std::nan(""), instrument::kOverload));
    watch.see(at(0.6, 40));
    watch.see(at(1.2, 41));
    CHECK_FALSE(watch.check(std::llround(1.2e9)));
    CHECK(*watch.value(std::llround(1.2e9)) == 41);
  }
  SECTION("with the unit changed it says nothing of this quantity") {
    for (const double t : {0.4, 0.6, 0.8, 1.0, 1.2}) {
      watch.see(at(t, std::nan(""), instrument::kOverload | instrument::kUnitChanged));
    }
    CHECK_FALSE(watch.check(std::llround(1.2e9)));
  }
}

TEST_CASE("an overload where only a lower limit is guarded is missing, never a value") {
  auto guard = above(95);
  guard.above.reset();
  guard.below = 10;
  guard.missing = setup::MissingAction::hold;
  GuardWatch watch{guard, "degC", 0.5};
  watch.arm(0);
  for (int i = 1; i <= 10; ++i) watch.see(at(0.2 * i, 9.9e37, instrument::kOverload));
  const auto cause = watch.check(2 * kSecond);
  REQUIRE(cause);
  CHECK(cause->demand == GuardDemand::hold);
}

TEST_CASE("beyond the limit and then silent trips with the limit's action, even where missing is ignored") {
  auto guard = above(95, 0.6);
  guard.missing = setup::MissingAction::ignore;
  guard.action = setup::GuardAction::next;
  GuardWatch watch{guard, "degC", 0.5};
  watch.arm(0);
  watch.see(at(0.1, 120));
  CHECK_FALSE(watch.check(kSecond));
  const auto cause = watch.check(std::llround(1.7e9));
  REQUIRE(cause);
  CHECK(cause->demand == GuardDemand::next);
  CHECK(cause->text.ends_with("and silent since"));
}

TEST_CASE("below, both limits and their margin") {
  auto guard = above(264);
  guard.below = 195;
  GuardWatch watch{guard, "V", 0.5};
  watch.arm(0);
  watch.see(at(0.1, 230));
  CHECK(*watch.margin(kSecond / 10) == Approx(34));  // 264 - 230, nearer than 230 - 195
  watch.see(at(0.2, 190));
  CHECK(*watch.margin(kSecond / 5) == Approx(-5));
  const auto cause = watch.check(kSecond / 5);
  REQUIRE(cause);
  CHECK(cause->text == "heatsink is 190 V, below 195 V");
}

TEST_CASE("a guard that is not armed says nothing; armed again it begins anew") {
  GuardWatch watch{above(95), "degC", 0.5};
  watch.see(at(0.1, 120));
  CHECK_FALSE(watch.check(kSecond));
  CHECK(watch.standing(kSecond) == GuardWatch::Standing::off);
  watch.arm(kSecond);
  CHECK_FALSE(watch.check(kSecond));
  watch.see(at(1.1, 120));
  CHECK(watch.check(std::llround(1.1e9)));
  watch.arm(2 * kSecond);
  CHECK_FALSE(watch.check(2 * kSecond));
}

}  // namespace
}  // namespace loadstair::sequencer
