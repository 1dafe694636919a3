// A wait that ends when something is notified or a deadline passes: what a condition variable is to threads.
#pragma once

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <cstdint>
#include <memory>

#include "drivers/link/clock.h"

namespace loadstair::link {

/// One waiter at a time, on one executor. Nothing is remembered: the waiter checks its condition, then waits,
/// in a loop; between the two nobody else runs.
class Notice {
 public:
  Notice(Clock& clock, boost::asio::any_io_executor executor)
      : timer_{clock.make_timer(std::move(executor))} {}

  /// Ends the wait in progress, if any.
  void notify() { timer_->cancel(); }

  /// Waits for `notify`, for `deadline_ns` (INT64_MAX: none) or for the cancellation of the coroutine.
  /// Returns at once when the deadline has passed. Throws nothing.
  [[nodiscard]] Wait wait_until(std::int64_t deadline_ns);

 private:
  std::unique_ptr<Clock::Timer> timer_;
};

}  // namespace loadstair::link
