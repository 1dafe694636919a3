#include "drivers/link/clock.h"

#include <boost/asio/co_spawn.hpp>
#include <boost/asio/this_coro.hpp>
#include <catch2/catch.hpp>
#include <string>
#include <vector>

#include "drivers/link/notice.h"
#include "drivers/link/task_scope.h"

namespace {

namespace net = boost::asio;
using namespace loadstair::link;
using namespace std::chrono_literals;

constexpr std::int64_t kSecondNs = 1'000'000'000;

void rethrow(const std::exception_ptr& failure) {
  std::rethrow_exception(failure);
}

}  // namespace

TEST_CASE("an hour of virtual waiting passes in order of time, then of arming") {
  net::io_context io;
  const auto clock = VirtualClock::make(io, 5 * kSecondNs);
  TaskScope scope{io.get_executor(), rethrow};
  std::string order;
  const auto sleeper = [](Clock& c, std::int64_t t_ns, char letter,
                          std::string& log) -> net::awaitable<void> {
    co_await c.sleep_until(t_ns);
    log += letter;
    co_await c.sleep_until(t_ns);  // already passed: returns at once
    log += letter;
  };
  scope.spawn(sleeper(*clock, 3600 * kSecondNs, 'c', order));
  scope.spawn(sleeper(*clock, 2 * kSecondNs, 'a', order));
  scope.spawn(sleeper(*clock, 2 * kSecondNs, 'b', order));
  clock->run();
  CHECK(order == "aabbcc");
  CHECK(clock->now_ns() == 3600 * kSecondNs);
  CHECK(scope.size() == 0);
  CHECK(clock->utc_offset_ns() == 5 * kSecondNs);
  clock->step_utc(-1s);
  CHECK(clock->utc_offset_ns() == 4 * kSecondNs);
}

TEST_CASE("virtual time stops at the limit asked for and can go on") {
  net::io_context io;
  const auto clock = VirtualClock::make(io, 0);
  TaskScope scope{io.get_executor(), rethrow};
  int ticks = 0;
  scope.spawn([](Clock& c, int& count) -> net::awaitable<void> {
    for (std::int64_t t_ns = 0; t_ns <= 10 * kSecondNs; t_ns += kSecondNs) {
      co_await c.sleep_until(t_ns);
      ++count;
    }
  }(*clock, ticks));
  clock->run(4 * kSecondNs + 500'000'000);
  CHECK(ticks == 5);
  CHECK(clock->now_ns() == 4 * kSecondNs + 500'000'000);
  clock->run(5 * kSecondNs);  // an instant equal to the limit belongs to it
  CHECK(ticks == 6);
  clock->run();
  CHECK(ticks == 11);
  CHECK(clock->now_ns() == 10 * kSecondNs);
}

TEST_CASE("a notice ends a wait early and its deadline ends it in time, on both clocks") {
  net::io_context io;
  std::unique_ptr<Clock> clock;
  VirtualClock* driver = nullptr;
  SECTION("virtual") {
    auto made = VirtualClock::make(io, 0);
    driver = made.get();
    clock = std::move(made);
  }
  SECTION("real") {
    clock = make_real_clock();
  }
  const auto start_ns = clock->now_ns();
  Notice notice{*clock, io.get_executor()};
  TaskScope scope{io.get_executor(), rethrow};
  std::vector<std::int64_t> ended_ns;
  scope.spawn([](Clock& c, Notice& n, std::vector<std::int64_t>& log) -> net::awaitable<void> {
    const auto begin_ns = c.now_ns();
    co_await n.wait_until(INT64_MAX);
    log.push_back(c.now_ns() - begin_ns);
    co_await n.wait_until(begin_ns + 30'000'000);
    log.push_back(c.now_ns() - begin_ns);
  }(*clock, notice, ended_ns));
  scope.spawn([](Clock& c, Notice& n) -> net::awaitable<void> {
    co_await c.sleep_for(10ms);
    n.notify();
  }(*clock, notice));
  if (driver != nullptr) {
    driver->run();
    CHECK(ended_ns == std::vector<std::int64_t>{10'000'000, 30'000'000});
  } else {
    io.run();
    REQUIRE(ended_ns.size() == 2);
    CHECK(ended_ns[0] >= 10'000'000);
    CHECK(ended_ns[1] >= 30'000'000);
  }
  CHECK(clock->now_ns() - start_ns >= 30'000'000);
}

TEST_CASE("the real clock's wall time is the system's") {
  const auto clock = make_real_clock();
  const auto before = std::chrono::system_clock::now().time_since_epoch();
  const auto utc_ns = clock->now_ns() + clock->utc_offset_ns();
  const auto after = std::chrono::system_clock::now().time_since_epoch();
  CHECK(utc_ns >= std::chrono::nanoseconds{before}.count() - 1'000'000);
  CHECK(utc_ns <= std::chrono::nanoseconds{after}.count() + 1'000'000);
}

TEST_CASE("an io_context may outlive the virtual clock whose timers it still holds") {
  net::io_context io;
  TaskScope scope{io.get_executor(), rethrow};
  const auto clock = VirtualClock::make(io, 0);
  scope.spawn([](Clock& c) -> net::awaitable<void> { co_await c.sleep_for(1h); }(*clock));
  clock->run(kSecondNs);
  CHECK(scope.size() == 1);
}
