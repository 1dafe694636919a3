#include <algorithm>
#include <boost/asio/this_coro.hpp>
#include <deque>
#include <utility>

#include "drivers/link/inbox.h"
#include "drivers/link/link.h"

namespace loadstair::link {
namespace {

// Like a system's buffer: who writes without being read waits.
constexpr std::size_t kCapacity = std::size_t{256} * 1024;
// Paced bytes arrive in pieces of this size, after the first alone (its instant is asked for).
constexpr std::size_t kPiece = 16;

/// One direction: bytes on the wire, then the inbox of the end that reads. Shared by both ends.
class Wire : public std::enable_shared_from_this<Wire> {
 public:
  Wire(boost::asio::any_io_executor executor, Clock& clock, std::optional<int> baud)
      : clock_{clock},
        inbox_{clock, executor},
        room_{clock, executor},
        pace_{clock.make_timer(executor)},
        byte_ns_{baud && *baud > 0 ? 10'000'000'000 / *baud : 0} {}

  [[nodiscard]] Inbox& inbox() { return inbox_; }
  [[nodiscard]] bool full() const { return inbox_.size() + on_the_wire_.size() >= kCapacity; }
  [[nodiscard]] Notice& room() { return room_; }
  void taken() { room_.notify(); }

  void put(std::string_view bytes) {
    if (byte_ns_ == 0) {
      inbox_.append(bytes);
      return;
    }
    if (on_the_wire_.empty()) free_at_ns_ = std::max(free_at_ns_, clock_.now_ns());
    on_the_wire_.append(bytes);
    first_of_message_ = true;
    if (!pacing_) deliver_next();
  }

  /// A cable that is pulled: bytes on the wire are lost, those that arrived can be read.
  void end() {
    on_the_wire_.clear();
    pace_->cancel();
    inbox_.end();
    room_.notify();
  }

 private:
  void deliver_next() {
    pacing_ = !on_the_wire_.empty();
    if (!pacing_) return;
    const auto count = first_of_message_ ? 1 : std::min(kPiece, on_the_wire_.size());
    first_of_message_ = false;
    free_at_ns_ += byte_ns_ * static_cast<std::int64_t>(count);
    pace_->expires_at(free_at_ns_);
    pace_->inner().async_wait([self = shared_from_this(), count](const boost::system::error_code&) {
      const auto arrived = std::min(count, self->on_the_wire_.size());
      self->inbox_.append(std::string_view{self->on_the_wire_}.substr(0, arrived));
      self->on_the_wire_.erase(0, arrived);
      self->deliver_next();
    });
  }

  Clock& clock_;
  Inbox inbox_;
  Notice room_;
  std::unique_ptr<Clock::Timer> pace_;
  std::int64_t byte_ns_;
  std::int64_t free_at_ns_ = 0;  ///< when the wire has passed on what it holds
  std::string on_the_wire_;
  bool first_of_message_ = false;
  bool pacing_ = false;
};

// Coroutines hold the wire itself: a link may be destroyed while one of its reads waits.
boost::asio::awaitable<Status> write_to(std::shared_ptr<Wire> wire, std::shared_ptr<Wire> back,
                                        std::string bytes, Clock& clock, std::int64_t deadline_ns) {
  while (!wire->inbox().ended() && !back->inbox().ended() && wire->full()) {
    if (clock.now_ns() >= deadline_ns) co_return Status::timeout;
    co_await wire->room().wait_until(deadline_ns);
  }
  if (wire->inbox().ended() || back->inbox().ended()) co_return Status::closed;
  wire->put(bytes);
  co_return Status::done;
}

boost::asio::awaitable<Received> line_from(std::shared_ptr<Wire> wire, std::string terminator,
                                           std::int64_t deadline_ns) {
  auto received = co_await wire->inbox().read_line(std::move(terminator), deadline_ns);
  wire->taken();
  co_return received;
}

boost::asio::awaitable<Received> bytes_from(std::shared_ptr<Wire> wire, std::size_t count,
                                            std::int64_t deadline_ns) {
  auto received = co_await wire->inbox().read_exactly(count, deadline_ns);
  wire->taken();
  co_return received;
}

class MemoryLink final : public Link {
 public:
  MemoryLink(Clock& clock, std::shared_ptr<Wire> to_peer, std::shared_ptr<Wire> from_peer, std::string name)
      : clock_{clock},
        to_peer_{std::move(to_peer)},
        from_peer_{std::move(from_peer)},
        name_{std::move(name)} {}
  ~MemoryLink() override { close(); }
  MemoryLink(const MemoryLink&) = delete;
  MemoryLink& operator=(const MemoryLink&) = delete;

  boost::asio::awaitable<Status> write(std::string bytes, std::int64_t deadline_ns) override {
    return write_to(to_peer_, from_peer_, std::move(bytes), clock_, deadline_ns);
  }
  boost::asio::awaitable<Received> read_line(std::string terminator, std::int64_t deadline_ns) override {
    return line_from(from_peer_, std::move(terminator), deadline_ns);
  }
  boost::asio::awaitable<Received> read_exactly(std::size_t count, std::int64_t deadline_ns) override {
    return bytes_from(from_peer_, count, deadline_ns);
  }
  void drain() override {
    from_peer_->inbox().clear();
    from_peer_->taken();
  }
  void close() override {
    from_peer_->inbox().clear();
    from_peer_->end();
    to_peer_->end();
  }
  [[nodiscard]] std::string name() const override { return name_; }

 private:
  Clock& clock_;
  std::shared_ptr<Wire> to_peer_;
  std::shared_ptr<Wire> from_peer_;
  std::string name_;
};

}  // namespace

std::pair<std::unique_ptr<Link>, std::unique_ptr<Link>> make_memory_pair(
    boost::asio::any_io_executor executor, Clock& clock, std::string name, std::optional<int> baud) {
  const auto there = std::make_shared<Wire>(executor, clock, baud);
  const auto back = std::make_shared<Wire>(executor, clock, baud);
  return {std::make_unique<MemoryLink>(clock, there, back, name),
          std::make_unique<MemoryLink>(clock, back, there, name)};
}

}  // namespace loadstair::link
