#include "drivers/link/task_scope.h"

#include <boost/asio/io_context.hpp>
#include <boost/asio/this_coro.hpp>
#include <catch2/catch.hpp>
#include <stdexcept>
#include <string>

#include "analysis/base/require.h"

namespace {

namespace net = boost::asio;
using namespace loadstair::link;
using namespace std::chrono_literals;

struct Bench {
  net::io_context io;
  std::unique_ptr<VirtualClock> clock = VirtualClock::make(io, 0);
  std::vector<std::string> failures;
  TaskScope scope{io.get_executor(), [this](std::exception_ptr failure) {
                    try {
                      std::rethrow_exception(failure);
                    } catch (const std::exception& error) {
                      failures.emplace_back(error.what());
                    }
                  }};
};

net::awaitable<void> sleep_for_ever(Clock& clock, bool& ended) {
  struct Mark {
    bool& flag;
    ~Mark() { flag = true; }
  } mark{ended};
  while (true) co_await clock.sleep_for(1h);
}

net::awaitable<void> break_promise(Clock& clock) {
  co_await clock.sleep_for(1s);
  loadstair::base::require(false, "promises are kept");
}

}  // namespace

TEST_CASE("what leaves a task reaches the owner, and the tasks beside it go on") {
  Bench bench;
  bool ended = false;
  bench.scope.spawn(sleep_for_ever(*bench.clock, ended));
  bench.scope.spawn(break_promise(*bench.clock));
  bench.clock->run(2'000'000'000);
  REQUIRE(bench.failures.size() == 1);
  CHECK(bench.failures[0].find("promises are kept") != std::string::npos);
  CHECK(bench.scope.size() == 1);
  CHECK_FALSE(ended);
}

TEST_CASE("close cancels every task, waits for its end and calls that no failure") {
  Bench bench;
  bool ended = false;
  bool closed = false;
  bench.scope.spawn(sleep_for_ever(*bench.clock, ended));
  bench.clock->run(1'000'000'000);
  TaskScope owner{bench.io.get_executor(), nullptr};
  owner.spawn([](TaskScope& scope, bool& inner_ended, bool& done) -> net::awaitable<void> {
    co_await scope.close();
    CHECK(inner_ended);
    done = true;
  }(bench.scope, ended, closed));
  bench.clock->run(bench.clock->now_ns());
  CHECK(closed);
  CHECK(bench.failures.empty());
  CHECK(bench.clock->now_ns() == 1'000'000'000);
}

TEST_CASE("a task given to a cancelled scope takes no step, nor does one cancelled before its first turn") {
  Bench bench;
  bool stepped = false;
  const auto step = [](bool& flag) -> net::awaitable<void> {
    flag = true;
    co_return;
  };
  bench.scope.spawn(step(stepped));
  bench.scope.cancel();
  bench.scope.spawn(step(stepped));
  bench.clock->run();
  CHECK_FALSE(stepped);
  CHECK(bench.scope.size() == 0);
  CHECK(bench.failures.empty());
}

TEST_CASE("join waits without cancelling, and a task may cancel the scope that it is in") {
  Bench bench;
  bool ended = false;
  std::string log;
  bench.scope.spawn(sleep_for_ever(*bench.clock, ended));
  bench.scope.spawn([](Bench& b, std::string& text) -> net::awaitable<void> {
    co_await b.clock->sleep_for(5s);
    b.scope.cancel();
    text += "cancelled;";
  }(bench, log));
  TaskScope owner{bench.io.get_executor(), nullptr};
  owner.spawn([](Bench& b, std::string& text) -> net::awaitable<void> {
    co_await b.scope.join();
    text += "joined";
  }(bench, log));
  bench.clock->run();
  CHECK(log == "cancelled;joined");
  CHECK(ended);
  CHECK(bench.clock->now_ns() == 5'000'000'000);
}
