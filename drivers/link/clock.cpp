#include "drivers/link/clock.h"

#include <boost/asio/as_tuple.hpp>
#include <boost/asio/this_coro.hpp>
#include <boost/asio/use_awaitable.hpp>
#include <ctime>

#include "drivers/link/notice.h"

namespace loadstair::link {
namespace {

using boost::asio::steady_timer;

std::int64_t read_clock_ns(clockid_t which) {
  timespec now{};
  clock_gettime(which, &now);
  return static_cast<std::int64_t>(now.tv_sec) * 1'000'000'000 + now.tv_nsec;
}

class RealClock final : public Clock {
 public:
  // std::chrono::steady_clock is CLOCK_MONOTONIC too, so a timer's instant needs no conversion.
  [[nodiscard]] std::int64_t now_ns() const override { return read_clock_ns(CLOCK_MONOTONIC); }

  [[nodiscard]] std::int64_t utc_offset_ns() const override {
    const auto before = now_ns();
    const auto utc = read_clock_ns(CLOCK_REALTIME);
    const auto after = now_ns();
    return utc - (before + (after - before) / 2);
  }

  [[nodiscard]] std::unique_ptr<Timer> make_timer(boost::asio::any_io_executor executor) override {
    return std::make_unique<RealTimer>(executor);
  }

 private:
  class RealTimer final : public Timer {
   public:
    explicit RealTimer(const boost::asio::any_io_executor& executor)
        : inner_{executor, steady_timer::time_point::max()} {}

    void expires_at(std::int64_t t_ns) override {
      t_ns_ = t_ns;
      inner_.expires_at(steady_timer::time_point{std::chrono::nanoseconds{t_ns}});
    }
    void cancel() override { inner_.cancel(); }
    steady_timer& inner() override { return inner_; }
    [[nodiscard]] bool expired() const override { return read_clock_ns(CLOCK_MONOTONIC) >= t_ns_; }

   private:
    steady_timer inner_;
    std::int64_t t_ns_ = INT64_MAX;
  };
};

Wait wait_on(Clock::Timer& timer) {
  // The error code is always "aborted" on a virtual clock and says nothing.
  co_await timer.inner().async_wait(boost::asio::as_tuple(boost::asio::use_awaitable));
}

}  // namespace

std::unique_ptr<Clock> make_real_clock() {
  return std::make_unique<RealClock>();
}

Wait Clock::sleep_until(std::int64_t t_ns) {
  if (t_ns <= now_ns()) co_return;
  const auto timer = make_timer(co_await boost::asio::this_coro::executor);
  timer->expires_at(t_ns);
  co_await wait_on(*timer);
}

Wait Clock::sleep_for(std::chrono::nanoseconds length) {
  return sleep_until(now_ns() + length.count());
}

Wait Notice::wait_until(std::int64_t deadline_ns) {
  timer_->expires_at(deadline_ns);
  if (timer_->expired()) co_return;
  co_await wait_on(*timer_);
}

}  // namespace loadstair::link
