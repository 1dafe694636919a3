#include "daemon/recorder/window.h"

#include <catch2/catch.hpp>

#include "analysis/base/require.h"

namespace loadstair::recorder {
namespace {

Point point(std::int64_t t) {
  return {.t_ns = t,
          .half_width_ns = 1,
          .arrived_ns = t + 2,
          .value = 0.5 * static_cast<double>(t),
          .raw = 1,
          .flags = 0};
}

TEST_CASE("a window keeps the last readings, oldest first") {
  const std::size_t most = GENERATE(1U, 2U, 7U, 100U);
  Window window{most};
  CHECK_THROWS_AS(window.back(), base::BrokenPromise);
  for (std::int64_t t = 1; t <= 50; ++t) {
    window.push(point(t));
    REQUIRE(window.size() == std::min<std::size_t>(most, static_cast<std::size_t>(t)));
    REQUIRE(window.back().t_ns == t);
    REQUIRE(window.t_ns().front() == t - static_cast<std::int64_t>(window.size()) + 1);
    for (std::size_t i = 0; i < window.size(); ++i) {
      REQUIRE(window.value()[i] == 0.5 * static_cast<double>(window.t_ns()[i]));
      REQUIRE(window.arrived_ns()[i] == window.t_ns()[i] + 2);
    }
  }
  CHECK(window.first_from(0) == 0);
  CHECK(window.first_from(50) == window.size() - 1);
  CHECK(window.first_from(51) == window.size());
  window.clear();
  CHECK(window.empty());
}

}  // namespace
}  // namespace loadstair::recorder
