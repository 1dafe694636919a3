#include <map>
#include <utility>

#include "drivers/link/clock.h"

namespace loadstair::link {
namespace {

using boost::asio::steady_timer;

class ParkedTimer;

/// Shared by the clock and its timers: an io_context that goes after the clock still destroys timers.
struct Agenda {
  using Queue = std::map<std::pair<std::int64_t, std::uint64_t>, ParkedTimer*>;
  Queue queue;  ///< by instant, then by the order in which the instants were set
  std::uint64_t order = 0;
  std::int64_t now_ns = 0;
};

/// A steady_timer that Asio never expires: it is parked far away and released when virtual time comes.
class ParkedTimer final : public Clock::Timer {
 public:
  ParkedTimer(std::shared_ptr<Agenda> agenda, const boost::asio::any_io_executor& executor)
      : agenda_{std::move(agenda)}, inner_{executor, kParked} {}
  ~ParkedTimer() override { leave_queue(); }
  ParkedTimer(const ParkedTimer&) = delete;
  ParkedTimer& operator=(const ParkedTimer&) = delete;

  void expires_at(std::int64_t t_ns) override {
    leave_queue();
    t_ns_ = t_ns;
    if (expired()) {
      inner_.expires_at(kPassed);
      return;
    }
    inner_.expires_at(kParked);
    if (t_ns != INT64_MAX) {
      place_ = agenda_->queue.emplace(std::pair{t_ns, agenda_->order++}, this).first;
      queued_ = true;
    }
  }
  void cancel() override {
    leave_queue();
    inner_.cancel();
  }
  steady_timer& inner() override { return inner_; }
  [[nodiscard]] bool expired() const override { return agenda_->now_ns >= t_ns_; }

  /// Its instant has come: waits in progress end, later ones end at once.
  void release() {
    leave_queue();
    inner_.expires_at(kPassed);
  }

 private:
  static constexpr steady_timer::time_point kParked = steady_timer::time_point::max();
  static constexpr steady_timer::time_point kPassed{};

  void leave_queue() {
    if (!queued_) return;
    agenda_->queue.erase(place_);
    queued_ = false;
  }

  std::shared_ptr<Agenda> agenda_;
  steady_timer inner_;
  std::int64_t t_ns_ = INT64_MAX;
  Agenda::Queue::iterator place_;
  bool queued_ = false;
};

class ParkedClock final : public VirtualClock {
 public:
  ParkedClock(boost::asio::io_context& io, std::int64_t utc_start_ns)
      : io_{io}, utc_offset_ns_{utc_start_ns} {}

  [[nodiscard]] std::int64_t now_ns() const override { return agenda_->now_ns; }
  [[nodiscard]] std::int64_t utc_offset_ns() const override { return utc_offset_ns_; }
  void step_utc(std::chrono::nanoseconds by) override { utc_offset_ns_ += by.count(); }

  [[nodiscard]] std::unique_ptr<Timer> make_timer(boost::asio::any_io_executor executor) override {
    return std::make_unique<ParkedTimer>(agenda_, executor);
  }

  void run(std::int64_t until_ns) override {
    const Anchor anchor{io_};
    while (true) {
      while (io_.poll() > 0) continue;
      if (io_.stopped()) {  // somebody called stop(): hand back control as io_context::run would
        io_.restart();
        return;
      }
      const auto next = agenda_->queue.begin();
      if (next == agenda_->queue.end() || next->first.first > until_ns) break;
      agenda_->now_ns = next->first.first;
      next->second->release();
    }
    if (until_ns != INT64_MAX && until_ns > agenda_->now_ns) agenda_->now_ns = until_ns;
  }

 private:
  /// While `run` is at work one wait that comes before all parked ones keeps the io_context from stopping for
  /// want of work, and the system's timer from being set anew for every parked timer.
  class Anchor {
   public:
    explicit Anchor(boost::asio::io_context& io)
        : timer_{io, steady_timer::time_point::max() - std::chrono::hours{1}} {
      timer_.async_wait([](const boost::system::error_code&) {});
    }

   private:
    steady_timer timer_;
  };

  boost::asio::io_context& io_;
  std::shared_ptr<Agenda> agenda_ = std::make_shared<Agenda>();
  std::int64_t utc_offset_ns_ = 0;
};

}  // namespace

std::unique_ptr<VirtualClock> VirtualClock::make(boost::asio::io_context& io, std::int64_t utc_start_ns) {
  return std::make_unique<ParkedClock>(io, utc_start_ns);
}

}  // namespace loadstair::link
