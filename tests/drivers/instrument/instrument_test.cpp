#include "drivers/instrument/instrument.h"

#include <fcntl.h>
#include <stdlib.h>  // NOLINT: posix_openpt is POSIX, not C
#include <termios.h>
#include <unistd.h>

#include <algorithm>
#include <array>
#include <boost/asio/as_tuple.hpp>
#include <boost/asio/io_context.hpp>
#include <boost/asio/ip/tcp.hpp>
#include <boost/asio/this_coro.hpp>
#include <boost/asio/use_awaitable.hpp>
#include <catch2/catch.hpp>
#include <cmath>
#include <cstdlib>
#include <map>
#include <random>
#include <string>
#include <vector>

#include "analysis/base/number.h"
#include "drivers/link/task_scope.h"
#include "tests/drivers/instrument/test_profiles.h"

namespace {

namespace net = boost::asio;
using namespace loadstair;
using namespace loadstair::instrument;
using namespace std::chrono_literals;

constexpr std::int64_t kMilliNs = 1'000'000;
constexpr std::int64_t kSecondNs = 1'000'000'000;

void rethrow(const std::exception_ptr& failure) {
  std::rethrow_exception(failure);
}

struct Collector final : Sink {
  void on_exchange(const Exchange& exchange) override { exchanges.push_back(exchange); }
  void on_event(const Event& event) override { events.push_back(event); }

  [[nodiscard]] std::size_t count(EventKind kind) const {
    return static_cast<std::size_t>(
        std::count_if(events.begin(), events.end(), [kind](const Event& e) { return e.kind == kind; }));
  }
  std::vector<Exchange> exchanges;
  std::vector<Event> events;
};

InstrumentSettings settings_named(std::string name) {
  InstrumentSettings settings;
  settings.name = std::move(name);
  settings.identity = "north bench";
  return settings;
}

struct VirtualBench {
  net::io_context io;
  std::unique_ptr<link::VirtualClock> clock = link::VirtualClock::make(io, 0);
  link::TaskScope tasks{io.get_executor(), rethrow};
  Collector sink;
  std::unique_ptr<link::Link> far;
  std::optional<int> baud;

  link::Opener opener() {
    return [this] { return open(); };
  }
  net::awaitable<base::Outcome<std::unique_ptr<link::Link>>> open() {
    auto [near, other] = link::make_memory_pair(io.get_executor(), *clock, "bench link", baud);
    far = std::move(other);
    co_return std::move(near);
  }
};

/// Answers every query `delay_ns` after it came.
net::awaitable<void> answer(link::Clock& clock, link::Link& link, std::int64_t delay_ns, std::string reply) {
  while (true) {
    const auto query = co_await link.read_line("\n", INT64_MAX);
    if (query.status != link::Status::done) co_return;
    co_await clock.sleep_for(std::chrono::nanoseconds{delay_ns});
    // g++ 12 destroys the operands of a conditional twice within a co_await.
    const std::string text = query.bytes == "*IDN?" ? "north bench,meter,N-001,1.0" : reply;
    co_await link.write(text + "\n", INT64_MAX);
  }
}

net::awaitable<void> answer_when_open(VirtualBench& bench, std::int64_t delay_ns, std::string reply) {
  while (!bench.far) co_await bench.clock->sleep_for(1ms);
  co_await answer(*bench.clock, *bench.far, delay_ns, std::move(reply));
}

}  // namespace

TEST_CASE(
    "a reading stands for the middle of query and reply, less delay, half integration, half an update") {
  VirtualBench bench;
  auto settings = settings_named("voltmeter");
  settings.poll_s = 0.5;
  settings.update_s = 0.1;
  settings.integration_s = 0.02;
  settings.delay_s = 0.007;
  auto profile = test_profile("meter");
  // A conversion read at a moment of no significance is 0 to 100 ms old: 50 ms in the middle.
  std::int64_t half_update_ns = 50 * kMilliNs;
  SECTION("free-running") {}
  SECTION("triggered by the query") {
    profile.free_running = false;
    half_update_ns = 0;
  }
  Instrument meter{bench.io.get_executor(), *bench.clock, bench.opener(), profile, settings, bench.sink};
  bench.tasks.spawn(meter.run());
  bench.tasks.spawn(answer_when_open(bench, 30 * kMilliNs, "+3.85012E+02"));
  bench.clock->run(10 * kSecondNs);
  meter.stop();
  bench.clock->run();
  CHECK(bench.tasks.size() == 0);
  REQUIRE(bench.sink.exchanges.size() == 19);  // 0.5 s to 9.5 s: the grid does not drift
  for (std::size_t i = 0; i < bench.sink.exchanges.size(); ++i) {
    const auto& exchange = bench.sink.exchanges[i];
    const auto asked_ns = static_cast<std::int64_t>(i + 1) * kSecondNs / 2;
    CHECK(exchange.sent_ns == asked_ns);
    CHECK(exchange.received_ns == asked_ns + 30 * kMilliNs);
    CHECK(exchange.query == "MEAS:VOLT?");
    CHECK(exchange.reply == "+3.85012E+02");
    REQUIRE(exchange.readings.size() == 1);
    CHECK(exchange.readings[0].t_ns ==
          asked_ns + 15 * kMilliNs - 7 * kMilliNs - 10 * kMilliNs - half_update_ns);
    CHECK(exchange.readings[0].half_width_ns == 15 * kMilliNs + half_update_ns);
  }
}

TEST_CASE("a round that lasts longer than the period leaves instants out and does not shift the others") {
  VirtualBench bench;
  auto profile = test_profile("meter");
  profile.timeout_s = 2.0;
  Instrument meter{bench.io.get_executor(), *bench.clock, bench.opener(), profile,
                   settings_named("meter"), bench.sink};
  bench.tasks.spawn(meter.run());
  bench.tasks.spawn(answer_when_open(bench, 700 * kMilliNs, "1.0"));
  bench.clock->run(10 * kSecondNs);
  meter.stop();
  bench.clock->run();
  REQUIRE(bench.sink.exchanges.size() >= 8);
  for (std::size_t i = 0; i < bench.sink.exchanges.size(); ++i) {
    CHECK(bench.sink.exchanges[i].sent_ns == (static_cast<std::int64_t>(i) + 1) * kSecondNs);
  }
}

TEST_CASE("at a real rate the reading's half-width covers query and delay, not the length of the reply") {
  VirtualBench bench;
  bench.baud = 9600;
  Instrument meter{bench.io.get_executor(), *bench.clock, bench.opener(), test_profile("meter"),
                   settings_named("meter"), bench.sink};
  bench.tasks.spawn(meter.run());
  bench.tasks.spawn(answer_when_open(bench, 5 * kMilliNs, "+3.85012E+02"));
  bench.clock->run(3 * kSecondNs);
  meter.stop();
  bench.clock->run();
  REQUIRE_FALSE(bench.sink.exchanges.empty());
  const auto& exchange = bench.sink.exchanges[0];
  constexpr std::int64_t kByteNs = 10'000'000'000 / 9600;
  // "MEAS:VOLT?" and its line end, 5 ms, the first byte of the reply.
  CHECK(exchange.readings.at(0).half_width_ns == (11 * kByteNs + 5 * kMilliNs + kByteNs) / 2);
  CHECK(exchange.received_ns - exchange.sent_ns == 11 * kByteNs + 5 * kMilliNs + 13 * kByteNs);
}

TEST_CASE("the safe commands are on the wire at the instant they are asked for, a reply outstanding or not") {
  VirtualBench bench;
  Instrument load{bench.io.get_executor(), *bench.clock,           bench.opener(),
                  test_profile("load"),    settings_named("load"), bench.sink};
  bench.tasks.spawn(load.run());
  std::vector<std::pair<std::int64_t, std::string>> received;
  bench.tasks.spawn(
      [](VirtualBench& b, std::vector<std::pair<std::int64_t, std::string>>& log) -> net::awaitable<void> {
        while (!b.far) co_await b.clock->sleep_for(1ms);
        while (true) {
          const auto line = co_await b.far->read_line("\n", INT64_MAX);
          if (line.status != link::Status::done) co_return;
          log.emplace_back(line.last_ns, line.bytes);
          if (line.bytes == "*IDN?") co_await b.far->write("north bench,load,N-002,1.0\n", INT64_MAX);
        }
      }(bench, received));
  bench.clock->run(500 * kMilliNs + 1);  // the first query has just gone out
  REQUIRE(received.back().second == "MEAS:POW?");
  bench.tasks.spawn([](Instrument& i) -> net::awaitable<void> {
    const auto outcome = co_await i.make_safe();
    CHECK(outcome.state == CommandState::unreachable);  // nothing answers INP?
  }(load));
  bench.clock->run(bench.clock->now_ns());
  REQUIRE(received.size() >= 2);
  CHECK(received.back().second == "POW 0");
  CHECK(received.back().first == 500 * kMilliNs + 1);
  bench.clock->run(30 * kSecondNs);
  load.stop();
  bench.clock->run();
  CHECK(bench.tasks.size() == 0);
}

TEST_CASE("commands to an instrument that is not served end in time and send nothing") {
  VirtualBench bench;
  Instrument load{bench.io.get_executor(), *bench.clock,           bench.opener(),
                  test_profile("load"),    settings_named("load"), bench.sink};
  std::vector<CommandState> states;
  bench.tasks.spawn([](Instrument& i, std::vector<CommandState>& out) -> net::awaitable<void> {
    auto outcome = co_await i.apply("power", 300);
    out.push_back(outcome.state);
    outcome = co_await i.make_safe();
    out.push_back(outcome.state);
    i.stop();
    outcome = co_await i.switch_on();
    out.push_back(outcome.state);
    outcome = co_await i.make_safe();
    out.push_back(outcome.state);
  }(load, states));
  bench.clock->run();
  CHECK(states == std::vector<CommandState>(4, CommandState::unreachable));
  CHECK(bench.clock->now_ns() == 15 * kSecondNs);  // 5 s for the set point, 10 s for the safe state
  CHECK_FALSE(bench.far);
}

TEST_CASE("two that ask for the safe state share one, and both hear of it") {
  VirtualBench bench;
  Instrument load{bench.io.get_executor(), *bench.clock,           bench.opener(),
                  test_profile("load"),    settings_named("load"), bench.sink};
  bench.tasks.spawn(load.run());
  bench.tasks.spawn(answer_when_open(bench, 5 * kMilliNs, "0"));
  bench.clock->run(2 * kSecondNs + 300 * kMilliNs);
  int confirmed = 0;
  for (int i = 0; i < 2; ++i) {
    bench.tasks.spawn([](Instrument& instrument, int& count) -> net::awaitable<void> {
      const auto outcome = co_await instrument.make_safe();
      count += outcome.state == CommandState::confirmed ? 1 : 0;
    }(load, confirmed));
  }
  bench.clock->run(4 * kSecondNs);
  CHECK(confirmed == 2);
  CHECK(bench.sink.count(EventKind::command_sent) == 2);  // INP OFF and POW 0, once
  load.stop();
  bench.clock->run();
}

TEST_CASE("an instrument may be destroyed with its coroutines unfinished, and the loop may outlive it") {
  VirtualBench bench;
  auto load = std::make_unique<Instrument>(bench.io.get_executor(), *bench.clock, bench.opener(),
                                           test_profile("load"), settings_named("load"), bench.sink);
  bench.tasks.spawn(load->run());
  bench.clock->run(kSecondNs / 10);
  const auto told = bench.sink.events.size();
  load.reset();
  CHECK(bench.sink.events.size() == told);
}

TEST_CASE("cancelling the task ends it, and whoever waits for a command hears of it") {
  VirtualBench bench;
  Instrument load{bench.io.get_executor(), *bench.clock,           bench.opener(),
                  test_profile("load"),    settings_named("load"), bench.sink};
  link::TaskScope polling{bench.io.get_executor(), rethrow};
  polling.spawn(load.run());
  bench.clock->run(kSecondNs / 10);  // waiting for its identity, in vain
  CommandOutcome outcome;
  bench.tasks.spawn([](Instrument& i, CommandOutcome& out) -> net::awaitable<void> {
    out = co_await i.apply("power", 300);
  }(load, outcome));
  bench.clock->run(kSecondNs / 5);
  bench.tasks.spawn(polling.close());
  bench.clock->run(kSecondNs / 5 + 1);
  CHECK(polling.size() == 0);
  CHECK(bench.tasks.size() == 0);
  CHECK(load.state() == State::stopped);
  CHECK(outcome.state == CommandState::unreachable);
}

TEST_CASE("a command whose waiter was cancelled is not sent") {
  VirtualBench bench;
  Instrument load{bench.io.get_executor(), *bench.clock,           bench.opener(),
                  test_profile("load"),    settings_named("load"), bench.sink};
  link::TaskScope commands{bench.io.get_executor(), rethrow};
  bench.tasks.spawn(load.run());
  bench.clock->run(kSecondNs / 10);  // nobody has answered yet
  commands.spawn([](Instrument& i) -> net::awaitable<void> {
    const auto outcome = co_await i.apply("power", 300);
    CHECK(outcome.state == CommandState::confirmed);  // never reached
  }(load));
  bench.clock->run(kSecondNs / 5);
  bench.tasks.spawn(commands.close());
  bench.tasks.spawn(answer_when_open(bench, kMilliNs, "0.1"));
  bench.clock->run(3 * kSecondNs);
  CHECK(commands.size() == 0);
  CHECK(load.state() == State::ready);
  CHECK(bench.sink.count(EventKind::command_sent) == 0);
  CHECK(bench.sink.exchanges.size() > 3);
  load.stop();
  bench.clock->run();
}

// The oracle of "no wrong value stored as good": every reply carries a number that says which query it
// answers.
namespace {

struct Faulty {
  std::mt19937_64 engine;
  std::map<std::int64_t, std::pair<std::int64_t, bool>>
      asked;  ///< number: when its query came, and was it for volts
  std::int64_t next = 100'000;
  std::map<std::string, int> faults = {};

  std::string number() {
    const auto text = base::print_integer(next++);
    return "+" + text.substr(0, 1) + "." + text.substr(1) + "E+05";
  }
  double chance() { return static_cast<double>(engine() >> 11) * 0x1p-53; }
};

constexpr std::int64_t kFaultyUntilNs = 3000 * kSecondNs;

/// Replies in the order of the queries, as instruments do; each reply may suffer.
net::awaitable<void> be_faulty(VirtualBench& bench, Faulty& faulty) {
  while (true) {
    while (!bench.far && bench.clock->now_ns() < kFaultyUntilNs) co_await bench.clock->sleep_for(1ms);
    if (!bench.far) co_return;
    auto link = std::move(bench.far);
    while (true) {
      const auto query = co_await link->read_line("\n", bench.clock->now_ns() + 30 * kSecondNs);
      if (query.status != link::Status::done) break;
      std::string reply = "north bench,meter,N-001,1.0";
      if (query.bytes != "*IDN?") {
        faulty.asked[faulty.next] = {query.last_ns, query.bytes == "MEAS:VOLT?"};
        reply = faulty.number();
      }
      // A form of number must be known before a truncated one can be told from it.
      const double which = faulty.asked.size() > 10 ? faulty.chance() : 1.0;
      co_await bench.clock->sleep_for(5ms);
      if (which < 0.03) {
        ++faulty.faults["silence"];
        continue;
      }
      if (which < 0.08) {
        ++faulty.faults["late"];
        co_await bench.clock->sleep_for(
            std::chrono::nanoseconds{static_cast<std::int64_t>(faulty.chance() * 2e9)});
      } else if (which < 0.11) {
        ++faulty.faults["garbage"];
        reply = "\x01\xff" + reply.substr(faulty.engine() % reply.size());
      } else if (which < 0.12) {
        ++faulty.faults["truncated"];
        reply = reply.substr(0, 1 + faulty.engine() % (reply.size() - 1));
      } else if (which < 0.16) {
        ++faulty.faults["twice"];
        reply += "\n" + reply;
      } else if (which < 0.19) {
        ++faulty.faults["chopped"];
        const auto half = faulty.engine() % reply.size();
        co_await link->write(reply.substr(0, half), INT64_MAX);
        co_await bench.clock->sleep_for(50ms);
        reply = reply.substr(half);
      } else if (which < 0.20) {
        ++faulty.faults["vanish"];
        break;
      }
      co_await link->write(reply + "\n", INT64_MAX);
    }
    link->close();
    if (bench.clock->now_ns() > kFaultyUntilNs) co_return;
  }
}

}  // namespace

TEST_CASE("whatever goes wrong, a good reading is the reply to its own query") {
  const char* given = std::getenv("LOADSTAIR_SEED");
  const auto seed = given != nullptr ? static_cast<std::uint64_t>(base::parse_integer(given).value_or(0))
                                     : std::uint64_t{std::random_device{}()};
  std::printf("seed %llu\n", static_cast<unsigned long long>(seed));
  INFO("LOADSTAIR_SEED=" << seed);
  VirtualBench bench;
  Faulty faulty{std::mt19937_64{seed}, {}};
  Instrument meter{bench.io.get_executor(), *bench.clock, bench.opener(), test_profile("pair"),
                   settings_named("meter"), bench.sink};
  bench.tasks.spawn(meter.run());
  bench.tasks.spawn(be_faulty(bench, faulty));
  bench.clock->run(kFaultyUntilNs);
  meter.stop();
  bench.clock->run(3600 * kSecondNs);
  CHECK(bench.tasks.size() == 0);

  std::size_t good = 0;
  std::size_t flagged = 0;
  for (const auto& exchange : bench.sink.exchanges) {
    for (const auto& reading : exchange.readings) {
      if (reading.flags != 0) {
        ++flagged;
        CHECK(std::isnan(reading.value));
        continue;
      }
      ++good;
      INFO(exchange.query << " -> " << exchange.reply << " at " << exchange.sent_ns);
      const auto asked = faulty.asked.find(std::llround(reading.value));
      REQUIRE(asked != faulty.asked.end());
      CHECK(asked->second.first == exchange.sent_ns);
      CHECK(asked->second.second == (reading.value_index == 0));
      CHECK(asked->second.second == (exchange.query == "MEAS:VOLT?"));
    }
  }
  CHECK(good > 1000);
  CHECK(flagged > 100);
  for (const auto* kind : {"silence", "late", "garbage", "truncated", "twice", "chopped", "vanish"}) {
    INFO(kind);
    CHECK(faulty.faults[kind] > 0);
  }
  // What took replies away or spoilt them is to be seen.
  CHECK(flagged >= static_cast<std::size_t>(faulty.faults["silence"] + faulty.faults["garbage"]) / 2);
}

// The same over what a bench has.
namespace {

net::awaitable<void> watch(link::Clock& clock, Instrument& meter, Collector& sink, std::size_t readings) {
  const auto limit_ns = clock.now_ns() + 20 * kSecondNs;
  while (clock.now_ns() < limit_ns && sink.exchanges.size() < readings) co_await clock.sleep_for(1ms);
  meter.stop();
}

void check_good(const Collector& sink, std::size_t readings) {
  REQUIRE(sink.exchanges.size() >= readings);
  CHECK(sink.count(EventKind::connected) == 1);
  CHECK(sink.events.size() == 1);
  for (const auto& exchange : sink.exchanges) {
    REQUIRE(exchange.readings.size() == 1);
    CHECK(exchange.readings[0].flags == 0);
    CHECK(exchange.readings[0].value == 385.012);
    CHECK(exchange.readings[0].t_ns > exchange.sent_ns);
    CHECK(exchange.readings[0].t_ns < exchange.received_ns);
  }
}

}  // namespace

TEST_CASE("an instrument on a pty is polled in real time") {
  const int master = posix_openpt(O_RDWR | O_NOCTTY | O_CLOEXEC);
  REQUIRE(master >= 0);
  REQUIRE(grantpt(master) == 0);
  REQUIRE(unlockpt(master) == 0);
  std::array<char, 128> slave{};
  REQUIRE(ptsname_r(master, slave.data(), slave.size()) == 0);
  termios mode{};
  REQUIRE(tcgetattr(master, &mode) == 0);
  cfmakeraw(&mode);
  REQUIRE(tcsetattr(master, TCSANOW, &mode) == 0);

  net::io_context io;
  const auto clock = link::make_real_clock();
  link::TaskScope tasks{io.get_executor(), rethrow};
  Collector sink;
  const auto far = link::adopt_descriptor(io.get_executor(), *clock, master, "pty master");
  auto settings = settings_named("meter");
  settings.poll_s = 0.01;
  link::SerialSettings port;
  port.path = slave.data();
  Instrument meter{
      io.get_executor(),     *clock,   [&clock, port] { return link::open_serial(*clock, port); },
      test_profile("meter"), settings, sink};
  tasks.spawn(meter.run());
  tasks.spawn(answer(*clock, *far, kMilliNs, "+3.85012E+02"));
  tasks.spawn([](link::Clock& c, Instrument& i, Collector& s, link::Link& other) -> net::awaitable<void> {
    co_await watch(c, i, s, 20);
    other.close();
  }(*clock, meter, sink, *far));
  io.run();
  check_good(sink, 20);
}

TEST_CASE("an instrument on a socket is polled in real time") {
  net::io_context io;
  const auto clock = link::make_real_clock();
  link::TaskScope tasks{io.get_executor(), rethrow};
  Collector sink;
  net::ip::tcp::acceptor acceptor{io, {net::ip::address_v4::loopback(), 0}};
  auto settings = settings_named("meter");
  settings.poll_s = 0.001;
  link::TcpSettings address;
  address.host = "127.0.0.1";
  address.port = acceptor.local_endpoint().port();
  Instrument meter{
      io.get_executor(),     *clock,   [&clock, address] { return link::open_tcp(*clock, address); },
      test_profile("meter"), settings, sink};
  tasks.spawn(meter.run());
  tasks.spawn([](link::Clock& c, net::ip::tcp::acceptor& door) -> net::awaitable<void> {
    auto [error, socket] = co_await door.async_accept(net::as_tuple(net::use_awaitable));
    REQUIRE_FALSE(error);
    const auto far = link::adopt_descriptor(co_await net::this_coro::executor, c, socket.release(), "socket");
    co_await answer(c, *far, 0, "+3.85012E+02");
  }(*clock, acceptor));
  tasks.spawn(watch(*clock, meter, sink, 200));
  io.run();
  check_good(sink, 200);
}
