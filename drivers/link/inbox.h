// What has arrived on a link and was not read yet, with the instants of arrival. Every kind of link reads
// from one.
#pragma once

#include <cstdint>
#include <deque>
#include <optional>
#include <string>
#include <string_view>

#include "drivers/link/link.h"
#include "drivers/link/notice.h"

namespace loadstair::link {

/// The most that a line may hold (Link::read_line).
inline constexpr std::size_t kLineLimit = std::size_t{64} * 1024;

class Inbox {
 public:
  Inbox(Clock& clock, boost::asio::any_io_executor executor)
      : clock_{clock}, arrived_{clock, std::move(executor)} {}

  /// Takes what has arrived just now and wakes the reader.
  void append(std::string_view bytes);
  /// No more will come. What is there can still be read.
  void end();
  /// Forgets everything that has arrived; a line that was being thrown away for its length goes on being so.
  void clear();

  [[nodiscard]] std::size_t size() const { return bytes_.size() - head_; }
  [[nodiscard]] bool ended() const { return ended_; }

  [[nodiscard]] boost::asio::awaitable<Received> read_line(std::string terminator, std::int64_t deadline_ns);
  [[nodiscard]] boost::asio::awaitable<Received> read_exactly(std::size_t count, std::int64_t deadline_ns);

 private:
  /// Bytes up to this place of the stream had arrived by this instant.
  struct Stamp {
    std::uint64_t end;
    std::int64_t t_ns;
  };

  [[nodiscard]] std::optional<Received> take_line(std::string_view terminator);
  [[nodiscard]] Received take(std::size_t count);
  void discard(std::size_t count);
  [[nodiscard]] std::int64_t instant_of(std::size_t offset) const;

  Clock& clock_;
  Notice arrived_;
  std::string bytes_;  ///< from head_ on: not read yet
  std::size_t head_ = 0;
  std::size_t searched_ = 0;    ///< unread bytes known to hold no terminator
  std::uint64_t consumed_ = 0;  ///< place in the stream of the first unread byte
  std::deque<Stamp> stamps_;
  bool throwing_away_ = false;  ///< inside a line that is too long
  bool ended_ = false;
};

}  // namespace loadstair::link
