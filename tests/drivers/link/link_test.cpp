#include "drivers/link/link.h"

#include <fcntl.h>
#include <stdlib.h>  // NOLINT: posix_openpt is POSIX, not C
#include <termios.h>
#include <unistd.h>

#include <boost/asio/as_tuple.hpp>
#include <boost/asio/ip/tcp.hpp>
#include <boost/asio/this_coro.hpp>
#include <boost/asio/use_awaitable.hpp>
#include <catch2/catch.hpp>
#include <string>

#include "drivers/link/task_scope.h"

namespace {

namespace net = boost::asio;
using namespace loadstair::link;
using namespace std::chrono_literals;

constexpr std::int64_t kSecondNs = 1'000'000'000;
constexpr std::int64_t kNever = INT64_MAX;

// g++ 12 awaits a co_await inside CHECK more than once; as an argument it is awaited once.
void expect(Status status, Status wanted) {
  CHECK(status == wanted);
}
void expect(const std::string& bytes, const std::string& wanted) {
  CHECK(bytes == wanted);
}

SerialSettings port(std::string path, int baud = 9600, int data_bits = 8) {
  return {.path = std::move(path), .baud = baud, .data_bits = data_bits};
}
TcpSettings host(std::string name, int number) {
  return {.host = std::move(name), .port = number};
}

void rethrow(const std::exception_ptr& failure) {
  std::rethrow_exception(failure);
}

struct VirtualBench {
  explicit VirtualBench(std::optional<int> baud = std::nullopt) {
    std::tie(near, far) = make_memory_pair(io.get_executor(), *clock, "memory", baud);
  }
  net::io_context io;
  std::unique_ptr<VirtualClock> clock = VirtualClock::make(io, 0);
  TaskScope scope{io.get_executor(), rethrow};
  std::unique_ptr<Link> near;
  std::unique_ptr<Link> far;
};

net::awaitable<void> say_later(Clock& clock, Link& link, std::int64_t at_ns, std::string text) {
  co_await clock.sleep_until(at_ns);
  expect(co_await link.write(text, kNever), Status::done);
}

net::awaitable<void> read_line_into(Link& link, std::int64_t deadline_ns, std::vector<Received>& log,
                                    std::string terminator = "\n") {
  log.push_back(co_await link.read_line(terminator, deadline_ns));
}

/// A pty whose master side is ours.
struct Pty {
  Pty() : master{posix_openpt(O_RDWR | O_NOCTTY | O_CLOEXEC)} {
    REQUIRE(master >= 0);
    REQUIRE(grantpt(master) == 0);
    REQUIRE(unlockpt(master) == 0);
    std::array<char, 128> name{};
    REQUIRE(ptsname_r(master, name.data(), name.size()) == 0);
    path = name.data();
    termios mode{};  // no echo, which would come back to the master
    REQUIRE(tcgetattr(master, &mode) == 0);
    cfmakeraw(&mode);
    REQUIRE(tcsetattr(master, TCSANOW, &mode) == 0);
  }
  int master;
  std::string path;
};

}  // namespace

TEST_CASE("lines come whole, in order, without terminator, with the instants of their first and last byte") {
  VirtualBench bench;
  bench.scope.spawn(say_later(*bench.clock, *bench.far, 1 * kSecondNs, "+3.8"));
  bench.scope.spawn(say_later(*bench.clock, *bench.far, 2 * kSecondNs, "5E+02\r\n1\n\n2"));
  bench.scope.spawn(say_later(*bench.clock, *bench.far, 3 * kSecondNs, "3\n"));
  std::vector<Received> log;
  bench.scope.spawn([](Link& link, std::vector<Received>& out) -> net::awaitable<void> {
    for (int i = 0; i < 4; ++i) co_await read_line_into(link, kNever, out);
  }(*bench.near, log));
  bench.clock->run();
  REQUIRE(log.size() == 4);
  CHECK(log[0].bytes == "+3.85E+02");
  CHECK(log[0].first_ns == 1 * kSecondNs);
  CHECK(log[0].last_ns == 2 * kSecondNs);
  CHECK(log[1].bytes == "1");
  CHECK(log[1].first_ns == 2 * kSecondNs);
  CHECK(log[2].bytes.empty());
  CHECK(log[3].bytes == "23");
  CHECK(log[3].first_ns == 2 * kSecondNs);
  CHECK(log[3].last_ns == 3 * kSecondNs);
}

TEST_CASE("a deadline passes in virtual time and what came before it stays for the next read") {
  VirtualBench bench;
  bench.scope.spawn(say_later(*bench.clock, *bench.far, 1 * kSecondNs, "half"));
  bench.scope.spawn(say_later(*bench.clock, *bench.far, 5 * kSecondNs, " and half\n"));
  std::vector<Received> log;
  bench.scope.spawn([](Clock& clock, Link& link, std::vector<Received>& out) -> net::awaitable<void> {
    co_await read_line_into(link, 2 * kSecondNs, out);
    CHECK(clock.now_ns() == 2 * kSecondNs);
    co_await read_line_into(link, 1 * kSecondNs, out);  // already passed
    CHECK(clock.now_ns() == 2 * kSecondNs);
    co_await read_line_into(link, kNever, out);
  }(*bench.clock, *bench.near, log));
  bench.clock->run();
  REQUIRE(log.size() == 3);
  CHECK(log[0].status == Status::timeout);
  CHECK(log[0].bytes.empty());
  CHECK(log[1].status == Status::timeout);
  CHECK(log[2].status == Status::done);
  CHECK(log[2].bytes == "half and half");
}

TEST_CASE("terminators of more than one byte, in pieces, and exact counts") {
  VirtualBench bench;
  bench.scope.spawn(say_later(*bench.clock, *bench.far, 0, "a\rb\r"));
  bench.scope.spawn(say_later(*bench.clock, *bench.far, 1, "\ncd\r\n#15hello"));
  std::vector<Received> log;
  bench.scope.spawn([](Link& link, std::vector<Received>& out) -> net::awaitable<void> {
    co_await read_line_into(link, kNever, out, "\r\n");
    co_await read_line_into(link, kNever, out, "\r\n");
    out.push_back(co_await link.read_exactly(3, kNever));
    out.push_back(co_await link.read_exactly(5, kNever));
    out.push_back(co_await link.read_exactly(1, 7));
  }(*bench.near, log));
  bench.clock->run();
  REQUIRE(log.size() == 5);
  CHECK(log[0].bytes == "a\rb");
  CHECK(log[1].bytes == "cd");
  CHECK(log[2].bytes == "#15");
  CHECK(log[3].bytes == "hello");
  CHECK(log[4].status == Status::timeout);
}

TEST_CASE("a line that is too long is thrown away whole, and the next one is whole again") {
  VirtualBench bench;
  const std::string long_line(70'000, 'x');
  bench.scope.spawn(say_later(*bench.clock, *bench.far, 0, long_line));
  bench.scope.spawn(say_later(*bench.clock, *bench.far, 2, long_line + "\n" + long_line + "\nnext\n"));
  std::vector<Received> log;
  bench.scope.spawn([](Link& link, std::vector<Received>& out) -> net::awaitable<void> {
    co_await read_line_into(link, 1, out);
    for (int i = 0; i < 3; ++i) co_await read_line_into(link, kNever, out);
  }(*bench.near, log));
  bench.clock->run();
  REQUIRE(log.size() == 4);
  CHECK(log[0].status == Status::timeout);
  CHECK(log[1].status == Status::too_long);
  CHECK(log[2].status == Status::too_long);
  CHECK(log[3].bytes == "next");
}

TEST_CASE("drain throws away what has arrived and nothing that comes later") {
  VirtualBench bench;
  bench.scope.spawn(say_later(*bench.clock, *bench.far, 1, "late\nfrag"));
  bench.scope.spawn(say_later(*bench.clock, *bench.far, 3, "fresh\n"));
  std::vector<Received> log;
  bench.scope.spawn([](Clock& clock, Link& link, std::vector<Received>& out) -> net::awaitable<void> {
    co_await clock.sleep_until(2);
    link.drain();
    co_await read_line_into(link, kNever, out);
  }(*bench.clock, *bench.near, log));
  bench.clock->run();
  REQUIRE(log.size() == 1);
  CHECK(log[0].bytes == "fresh");
  CHECK(log[0].first_ns == 3);
}

TEST_CASE("closing one end lets the other read what is there, then ends it; reads in progress end at once") {
  VirtualBench bench;
  std::vector<Received> near_log;
  std::vector<Received> far_log;
  bench.scope.spawn(read_line_into(*bench.far, kNever, far_log));
  bench.scope.spawn([](VirtualBench& b, std::vector<Received>& out) -> net::awaitable<void> {
    expect(co_await b.far->write("last words\nfragment", kNever), Status::done);
    co_await b.clock->sleep_for(1s);
    b.far->close();
    b.far->close();
    co_await read_line_into(*b.near, kNever, out);
    co_await read_line_into(*b.near, kNever, out);
    expect(co_await b.near->write("anybody?\n", kNever), Status::closed);
    expect(co_await b.far->write("no\n", kNever), Status::closed);
  }(bench, near_log));
  bench.clock->run();
  REQUIRE(far_log.size() == 1);
  CHECK(far_log[0].status == Status::closed);
  REQUIRE(near_log.size() == 2);
  CHECK(near_log[0].bytes == "last words");
  CHECK(near_log[1].status == Status::closed);
}

TEST_CASE("a link may be destroyed while a read of it waits") {
  VirtualBench bench;
  std::vector<Received> log;
  bench.scope.spawn(read_line_into(*bench.near, kNever, log));
  bench.clock->run(1);
  bench.near.reset();
  bench.clock->run(2);
  REQUIRE(log.size() == 1);
  CHECK(log[0].status == Status::closed);
}

TEST_CASE(
    "bytes are paced at ten bits each: first and last byte of a line come when a wire would bring them") {
  VirtualBench bench{9600};
  std::vector<Received> log;
  bench.scope.spawn(say_later(*bench.clock, *bench.far, kSecondNs, std::string(95, 'x') + "\n"));
  bench.scope.spawn(read_line_into(*bench.near, kNever, log));
  bench.clock->run();
  REQUIRE(log.size() == 1);
  constexpr std::int64_t kByteNs = 10'000'000'000 / 9600;
  CHECK(log[0].first_ns == kSecondNs + kByteNs);
  CHECK(log[0].last_ns == kSecondNs + 96 * kByteNs);
}

TEST_CASE("a writer whose peer does not read waits, and gives up at its deadline") {
  VirtualBench bench;
  int written = 0;
  bench.scope.spawn([](VirtualBench& b, int& count) -> net::awaitable<void> {
    while (co_await b.near->write(std::string(10'000, 'x') + "\n", kSecondNs) == Status::done) ++count;
    CHECK(b.clock->now_ns() == kSecondNs);
    std::vector<Received> log;
    co_await read_line_into(*b.far, kNever, log);
    expect(co_await b.near->write("room again\n", 2 * kSecondNs), Status::done);
  }(bench, written));
  bench.clock->run();
  CHECK(written > 0);
  CHECK(written < 100);
}

TEST_CASE(
    "a pty by its path: raw, at its rate, locked, flushed; its master may lose the slave and get it back") {
  Pty pty;
  REQUIRE(::write(pty.master, "before the open\n", 16) == 16);
  net::io_context io;
  const auto clock = make_real_clock();
  const auto limit_ns = clock->now_ns() + 20 * kSecondNs;
  TaskScope scope{io.get_executor(), rethrow};
  bool finished = false;
  scope.spawn([](Clock& c, Pty& p, std::int64_t deadline_ns, bool& done) -> net::awaitable<void> {
    const auto instrument = adopt_descriptor(co_await net::this_coro::executor, c, p.master, "pty master");
    auto opened = co_await open_serial(c, port(p.path, 19200));
    REQUIRE(opened.ok());
    auto link = std::move(*opened);
    CHECK(link->name() == "serial " + p.path + " at 19200 baud");
    termios mode{};
    REQUIRE(tcgetattr(p.master, &mode) == 0);
    CHECK(cfgetospeed(&mode) == B19200);
    CHECK((mode.c_lflag & static_cast<tcflag_t>(ICANON | ECHO)) == 0);

    const auto second = co_await open_serial(c, port(p.path));
    REQUIRE_FALSE(second.ok());
    CHECK(second.refusal().text() ==
          "serial " + p.path + " at 9600 baud: in use by another program; end that one first");

    expect(co_await link->write("MEAS:VOLT?\n", deadline_ns), Status::done);
    auto query = co_await instrument->read_line("\n", deadline_ns);
    CHECK(query.bytes == "MEAS:VOLT?");
    const auto before_ns = c.now_ns();
    expect(co_await instrument->write("+3.85012E+02\r\n", deadline_ns), Status::done);
    const auto reply = co_await link->read_line("\n", deadline_ns);
    CHECK(reply.bytes == "+3.85012E+02");
    CHECK(reply.first_ns >= before_ns);
    CHECK(reply.last_ns <= c.now_ns());

    link->close();
    expect((co_await link->read_line("\n", deadline_ns)).status, Status::closed);
    const auto silent = co_await instrument->read_line("\n", c.now_ns() + 50'000'000);
    CHECK(silent.status == Status::timeout);  // nobody there is not the end
    auto again = co_await open_serial(c, port(p.path, 12345, 7));
    REQUIRE(again.ok());
    expect(co_await (*again)->write("back\n", deadline_ns), Status::done);
    expect((co_await instrument->read_line("\n", deadline_ns)).bytes, "back");

    instrument->close();
    expect((co_await (*again)->read_line("\n", deadline_ns)).status, Status::closed);
    expect(co_await (*again)->write("anybody?\n", deadline_ns), Status::closed);
    done = true;
  }(*clock, pty, limit_ns, finished));
  io.run();
  CHECK(finished);
}

TEST_CASE("ports that are not there or not ports are refused with what to do") {
  net::io_context io;
  const auto clock = make_real_clock();
  TaskScope scope{io.get_executor(), rethrow};
  std::vector<std::string> refusals;
  scope.spawn([](Clock& c, std::vector<std::string>& out) -> net::awaitable<void> {
    out.push_back((co_await open_serial(c, port("/dev/ttyLoadstair0"))).refusal().text());
    out.push_back((co_await open_serial(c, port("/dev/null", 300))).refusal().text());
    out.push_back((co_await open_tcp(c, host("127.0.0.1", 0))).refusal().text());
    out.push_back((co_await open_tcp(c, host("127.0.0.1", 1))).refusal().text());
  }(*clock, refusals));
  io.run();
  CHECK(refusals ==
        std::vector<std::string>{
            "serial /dev/ttyLoadstair0 at 9600 baud: no such port; is the cable plugged in? See "
            "which ports the system has, then correct the link",
            "serial /dev/null at 300 baud: not one of the system's serial ports; name the device of the "
            "port, such as /dev/ttyUSB0",
            "tcp 127.0.0.1:0: the port must be 1 to 65535",
            "tcp 127.0.0.1:1: no connection (Connection refused); is the instrument on, and is this its "
            "port?"});
}

TEST_CASE(
    "a socket on loopback: a conversation, a burst larger than the system's buffers, and the peer's end") {
  net::io_context io;
  const auto clock = make_real_clock();
  const auto limit_ns = clock->now_ns() + 20 * kSecondNs;
  TaskScope scope{io.get_executor(), rethrow};
  net::ip::tcp::acceptor acceptor{io, {net::ip::address_v4::loopback(), 0}};
  const std::string burst(3'000'000, 'y');
  bool finished = false;
  scope.spawn([](Clock& c, net::ip::tcp::acceptor& door, std::int64_t deadline_ns,
                 std::size_t burst_size) -> net::awaitable<void> {
    auto [error, socket] = co_await door.async_accept(net::as_tuple(net::use_awaitable));
    REQUIRE_FALSE(error);
    const auto link =
        adopt_descriptor(co_await net::this_coro::executor, c, socket.release(), "accepted socket");
    expect((co_await link->read_line("\n", deadline_ns)).bytes, "*IDN?");
    expect(co_await link->write("Marten bench,load,0,1\n", deadline_ns), Status::done);
    for (std::size_t count = 0; count < burst_size; count += 100'000) {
      const auto piece = co_await link->read_exactly(100'000, deadline_ns);
      REQUIRE(piece.status == Status::done);
    }
    expect(co_await link->write("all there\n", deadline_ns), Status::done);
  }(*clock, acceptor, limit_ns, burst.size()));
  scope.spawn([](Clock& c, int port, std::int64_t deadline_ns, const std::string& text,
                 bool& done) -> net::awaitable<void> {
    auto opened = co_await open_tcp(c, host("localhost", port));
    REQUIRE(opened.ok());
    const auto link = std::move(*opened);
    expect(co_await link->write("*IDN?\n", deadline_ns), Status::done);
    expect((co_await link->read_line("\n", deadline_ns)).bytes, "Marten bench,load,0,1");
    expect(co_await link->write(text, deadline_ns), Status::done);
    expect((co_await link->read_line("\n", deadline_ns)).bytes, "all there");
    expect((co_await link->read_line("\n", deadline_ns)).status, Status::closed);
    co_await c.sleep_for(1ms);
    expect(co_await link->write("anybody?\n", deadline_ns), Status::closed);  // and no SIGPIPE
    done = true;
  }(*clock, acceptor.local_endpoint().port(), limit_ns, burst, finished));
  io.run();
  CHECK(finished);
}

TEST_CASE("a write to a peer that reads nothing ends at its deadline") {
  Pty pty;
  net::io_context io;
  const auto clock = make_real_clock();
  TaskScope scope{io.get_executor(), rethrow};
  Status status = Status::done;
  scope.spawn([](Clock& c, Pty& p, Status& out) -> net::awaitable<void> {
    auto opened = co_await open_serial(c, port(p.path));
    REQUIRE(opened.ok());
    out = co_await (*opened)->write(std::string(1'000'000, 'z'), c.now_ns() + 30'000'000);
  }(*clock, pty, status));
  io.run();
  CHECK(status == Status::timeout);
  ::close(pty.master);
}
