// One interface for serial ports, sockets and memory: write, read a line or N bytes, each with a deadline.
#pragma once

#include <boost/asio/awaitable.hpp>
#include <chrono>
#include <cstdint>
#include <functional>
#include <memory>
#include <optional>
#include <string>
#include <string_view>

#include "analysis/base/outcome.h"
#include "drivers/link/clock.h"

namespace loadstair::link {

enum class Status {
  done,      ///< what was asked for is here
  timeout,   ///< the deadline passed first; what did arrive stays buffered for the next read
  closed,    ///< the peer or the port has gone; the link is of no further use
  too_long,  ///< a line longer than the limit; it was thrown away up to and including its end
};

/// What a bench does is a value, not an exception.
struct Received {
  Status status = Status::closed;
  std::string
      bytes;  ///< the line without its terminator, or the N bytes; partial text on timeout is not here
  std::int64_t first_ns = 0;  ///< monotonic instant at which the first byte of it arrived (0 when none)
  std::int64_t last_ns = 0;   ///< and the last
};

/// A byte stream to one peer. One reader and one writer at a time, on one executor.
class Link {
 public:
  virtual ~Link() = default;

  /// Writes all of `bytes` (taken by value: it lives across the wait).
  [[nodiscard]] virtual boost::asio::awaitable<Status> write(std::string bytes, std::int64_t deadline_ns) = 0;
  /// One line, ended by `terminator` ("\n"; a '\r' before it is removed too). At most 64 KiB.
  [[nodiscard]] virtual boost::asio::awaitable<Received> read_line(std::string terminator,
                                                                   std::int64_t deadline_ns) = 0;
  /// Exactly `count` bytes, at least 1.
  [[nodiscard]] virtual boost::asio::awaitable<Received> read_exactly(std::size_t count,
                                                                      std::int64_t deadline_ns) = 0;
  /// Throws away everything received so far, in our buffer and in the system's.
  virtual void drain() = 0;
  /// Ends reads and writes in progress with Status::closed. Idempotent.
  virtual void close() = 0;
  /// "serial /dev/ttyUSB0 at 9600 baud", "tcp 127.0.0.1:5025", for messages.
  [[nodiscard]] virtual std::string name() const = 0;
};

enum class Parity { none, even, odd };

struct SerialSettings {
  std::string path;
  int baud = 9600;
  int data_bits = 8;
  Parity parity = Parity::none;
  int stop_bits = 1;
};

struct TcpSettings {
  std::string host;
  int port = 0;
};

// g++ 12 destroys an aggregate twice that is written with braces inside a co_await expression: build settings
// in a variable of their own first. (It also awaits a co_await more than once inside Catch2's CHECK.)

/// Opens a link; called again after a loss. The refusal says what was tried and what to do.
using Opener = std::function<boost::asio::awaitable<base::Outcome<std::unique_ptr<Link>>>()>;

/// A real port through libserialport, a pty by its path; locked with flock, flushed on open.
/// Refusals: no such port, in use by another program, setting not supported by a real port. On a pty,
/// settings that a pty cannot have count as "not supported here" and are passed over.
[[nodiscard]] boost::asio::awaitable<base::Outcome<std::unique_ptr<Link>>> open_serial(
    Clock& clock, SerialSettings settings);
[[nodiscard]] boost::asio::awaitable<base::Outcome<std::unique_ptr<Link>>> open_tcp(
    Clock& clock, TcpSettings settings, std::chrono::nanoseconds limit = std::chrono::seconds{3});

/// A link on a descriptor that is already open (the master side of a pty, an accepted socket). Takes
/// ownership.
[[nodiscard]] std::unique_ptr<Link> adopt_descriptor(boost::asio::any_io_executor executor, Clock& clock,
                                                     int fd, std::string name);

/// Two ends in memory. Closing one ends the other with Status::closed once its buffer is read.
/// `baud`: bytes are paced to this rate of ten bits a byte; nullopt: at once.
[[nodiscard]] std::pair<std::unique_ptr<Link>, std::unique_ptr<Link>> make_memory_pair(
    boost::asio::any_io_executor executor, Clock& clock, std::string name,
    std::optional<int> baud = std::nullopt);

}  // namespace loadstair::link
