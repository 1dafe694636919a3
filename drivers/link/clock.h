// link: asynchronous bytes to and from an instrument, with deadlines, and the clock that every wait uses.
// Not for what the bytes mean (dialect) nor for whom to ask and when (instrument).
#pragma once

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <boost/asio/io_context.hpp>
#include <boost/asio/steady_timer.hpp>
#include <chrono>
#include <cstdint>
#include <memory>

namespace loadstair::link {

using Wait = boost::asio::awaitable<void>;

/// The one source of time. Monotonic nanoseconds count from an origin of the clock's own; wall time is
/// monotonic plus `utc_offset_ns`, which may jump (a clock step or a suspend is an event of the run).
class Clock {
 public:
  virtual ~Clock() = default;

  /// Monotonic nanoseconds.
  [[nodiscard]] virtual std::int64_t now_ns() const = 0;
  /// UTC (nanoseconds since 1970) minus monotonic, as of now.
  [[nodiscard]] virtual std::int64_t utc_offset_ns() const = 0;

  /// A timer on this clock. Cancelling the wait (Asio cancellation or `cancel`) ends it early.
  class Timer {
   public:
    virtual ~Timer() = default;
    /// Sets the instant at which waits end; ends waits in progress with operation_aborted.
    virtual void expires_at(std::int64_t t_ns) = 0;
    virtual void cancel() = 0;
    /// The Asio timer to wait on: `co_await timer.inner().async_wait(token)`. Its error code says nothing of
    /// whether the time came; `expired()` does.
    virtual boost::asio::steady_timer& inner() = 0;
    [[nodiscard]] virtual bool expired() const = 0;
  };
  [[nodiscard]] virtual std::unique_ptr<Timer> make_timer(boost::asio::any_io_executor executor) = 0;

  /// Waits until `t_ns`; returns at once when it has passed. Throws nothing; a cancelled wait returns early.
  [[nodiscard]] Wait sleep_until(std::int64_t t_ns);
  [[nodiscard]] Wait sleep_for(std::chrono::nanoseconds length);
};

/// CLOCK_MONOTONIC and CLOCK_REALTIME.
[[nodiscard]] std::unique_ptr<Clock> make_real_clock();

/// A clock that stands still while there is work and jumps to the next timer when the io_context is idle, so
/// that an hour of bench takes a second. One io_context, one thread.
class VirtualClock : public Clock {
 public:
  /// `utc_start_ns`: the wall time at monotonic zero.
  [[nodiscard]] static std::unique_ptr<VirtualClock> make(boost::asio::io_context& io,
                                                          std::int64_t utc_start_ns);

  /// Runs handlers and time until no handler and no timer is left, or `until_ns` is reached.
  virtual void run(std::int64_t until_ns = INT64_MAX) = 0;
  /// Moves the wall clock without moving the monotonic one: a clock step, for tests.
  virtual void step_utc(std::chrono::nanoseconds by) = 0;
};

}  // namespace loadstair::link
