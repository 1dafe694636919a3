#include "drivers/link/descriptor_link.h"

#include <fcntl.h>
#include <stdlib.h>  // NOLINT: ptsname_r is POSIX, not C
#include <sys/socket.h>
#include <sys/stat.h>
#include <termios.h>
#include <unistd.h>

#include <array>
#include <boost/asio/posix/stream_descriptor.hpp>
#include <cerrno>
#include <utility>

#include "drivers/link/inbox.h"

namespace loadstair::link {
namespace {

namespace net = boost::asio;

// Above this nothing more is taken from the system: a peer that talks to nobody waits, as on any line.
constexpr std::size_t kInboxLimit = std::size_t{256} * 1024;
// How often a pty master without a slave looks for one; the system gives no notice of it.
constexpr std::int64_t kAbsentSlavePollNs = 20'000'000;

/// Reads as soon as bytes arrive, so that their instant is theirs and not that of the reader's turn. Handlers
/// and coroutines hold it by shared_ptr: the link may be destroyed while they wait.
class Stream : public std::enable_shared_from_this<Stream> {
 public:
  Stream(const net::any_io_executor& executor, Clock& clock, int fd, DescriptorKind kind,
         std::function<void(int)> close_fd)
      : clock_{clock},
        inbox_{clock, executor},
        writable_{clock, executor},
        slave_poll_{clock.make_timer(executor)},
        descriptor_{executor, fd},
        kind_{kind},
        close_fd_{std::move(close_fd)} {
    descriptor_.native_non_blocking(true);
  }
  ~Stream() { close(); }
  Stream(const Stream&) = delete;
  Stream& operator=(const Stream&) = delete;

  [[nodiscard]] Inbox& inbox() { return inbox_; }
  [[nodiscard]] Notice& writable() { return writable_; }
  [[nodiscard]] bool closed() const { return !descriptor_.is_open() || inbox_.ended(); }

  void wait_readable() {
    if (waiting_ || closed()) return;
    if (inbox_.size() >= kInboxLimit) return;  // taken() goes on
    waiting_ = true;
    descriptor_.async_wait(net::posix::stream_descriptor::wait_read,
                           [self = shared_from_this()](const boost::system::error_code& error) {
                             self->waiting_ = false;
                             if (self->closed()) return;
                             if (error) {
                               self->inbox_.end();
                               return;
                             }
                             self->read_available();
                           });
  }

  void wait_writable() {
    descriptor_.async_wait(
        net::posix::stream_descriptor::wait_write,
        [self = shared_from_this()](const boost::system::error_code&) { self->writable_.notify(); });
  }

  /// The reader has made room.
  void taken() { wait_readable(); }

  void drain() {
    if (closed()) return;
    if (kind_ != DescriptorKind::socket) tcflush(descriptor_.native_handle(), TCIFLUSH);
    std::array<char, 4096> bytes{};
    // Bounded: a peer that never stops talking is not drained for ever.
    for (int piece = 0; piece < 256; ++piece) {
      if (::read(descriptor_.native_handle(), bytes.data(), bytes.size()) <= 0) break;
    }
    inbox_.clear();
    wait_readable();
  }

  /// Writes what the system takes now. Returns the number of bytes, or nullopt when the peer has gone.
  [[nodiscard]] std::optional<std::size_t> write_some(std::string_view bytes) {
    if (closed()) return std::nullopt;
    const auto fd = descriptor_.native_handle();
    while (true) {
      const auto count = kind_ == DescriptorKind::socket
                             ? ::send(fd, bytes.data(), bytes.size(), MSG_NOSIGNAL)
                             : ::write(fd, bytes.data(), bytes.size());
      if (count >= 0) return static_cast<std::size_t>(count);
      if (errno == EINTR) continue;
      if (errno == EAGAIN || errno == EWOULDBLOCK) return 0;
      inbox_.end();
      return std::nullopt;
    }
  }

  void close() {
    inbox_.end();
    slave_poll_->cancel();
    writable_.notify();
    if (!descriptor_.is_open()) return;
    descriptor_.cancel(ignored_);
    close_fd_(descriptor_.release());
  }

 private:
  void read_available() {
    std::array<char, 4096> bytes{};
    while (inbox_.size() < kInboxLimit) {
      const auto count = ::read(descriptor_.native_handle(), bytes.data(), bytes.size());
      if (count > 0) {
        inbox_.append({bytes.data(), static_cast<std::size_t>(count)});
        if (static_cast<std::size_t>(count) < bytes.size())
          break;  // waiting tells of what comes, or of the end
        continue;
      }
      if (count < 0 && errno == EINTR) continue;
      if (count < 0 && (errno == EAGAIN || errno == EWOULDBLOCK)) break;
      if (count < 0 && errno == EIO && kind_ == DescriptorKind::pty_master) {
        look_for_slave_later();
        return;
      }
      inbox_.end();
      return;
    }
    wait_readable();
  }

  void look_for_slave_later() {
    slave_poll_->expires_at(clock_.now_ns() + kAbsentSlavePollNs);
    slave_poll_->inner().async_wait([self = shared_from_this()](const boost::system::error_code&) {
      if (!self->closed()) self->read_available();
    });
  }

  Clock& clock_;
  Inbox inbox_;
  Notice writable_;
  std::unique_ptr<Clock::Timer> slave_poll_;
  net::posix::stream_descriptor descriptor_;
  DescriptorKind kind_;
  std::function<void(int)> close_fd_;
  boost::system::error_code ignored_;
  bool waiting_ = false;
};

net::awaitable<Status> write_to(std::shared_ptr<Stream> stream, Clock& clock, std::string bytes,
                                std::int64_t deadline_ns) {
  std::size_t written = 0;
  while (written < bytes.size()) {
    const auto count = stream->write_some(std::string_view{bytes}.substr(written));
    if (!count) co_return Status::closed;
    written += *count;
    if (written == bytes.size()) break;
    if (clock.now_ns() >= deadline_ns) co_return Status::timeout;
    stream->wait_writable();
    co_await stream->writable().wait_until(deadline_ns);
  }
  co_return stream->closed() ? Status::closed : Status::done;
}

net::awaitable<Received> line_from(std::shared_ptr<Stream> stream, std::string terminator,
                                   std::int64_t deadline_ns) {
  auto received = co_await stream->inbox().read_line(std::move(terminator), deadline_ns);
  stream->taken();
  co_return received;
}

net::awaitable<Received> bytes_from(std::shared_ptr<Stream> stream, std::size_t count,
                                    std::int64_t deadline_ns) {
  auto received = co_await stream->inbox().read_exactly(count, deadline_ns);
  stream->taken();
  co_return received;
}

class DescriptorLink final : public Link {
 public:
  DescriptorLink(std::shared_ptr<Stream> stream, Clock& clock, std::string name)
      : stream_{std::move(stream)}, clock_{clock}, name_{std::move(name)} {}
  ~DescriptorLink() override { stream_->close(); }
  DescriptorLink(const DescriptorLink&) = delete;
  DescriptorLink& operator=(const DescriptorLink&) = delete;

  net::awaitable<Status> write(std::string bytes, std::int64_t deadline_ns) override {
    return write_to(stream_, clock_, std::move(bytes), deadline_ns);
  }
  net::awaitable<Received> read_line(std::string terminator, std::int64_t deadline_ns) override {
    return line_from(stream_, std::move(terminator), deadline_ns);
  }
  net::awaitable<Received> read_exactly(std::size_t count, std::int64_t deadline_ns) override {
    return bytes_from(stream_, count, deadline_ns);
  }
  void drain() override { stream_->drain(); }
  void close() override {
    stream_->inbox().clear();
    stream_->close();
  }
  [[nodiscard]] std::string name() const override { return name_; }

 private:
  std::shared_ptr<Stream> stream_;
  Clock& clock_;
  std::string name_;
};

}  // namespace

DescriptorKind kind_of_descriptor(int fd) {
  struct stat info {};
  if (fstat(fd, &info) == 0 && S_ISSOCK(info.st_mode)) return DescriptorKind::socket;
  std::array<char, 128> slave{};
  return ptsname_r(fd, slave.data(), slave.size()) == 0 ? DescriptorKind::pty_master
                                                        : DescriptorKind::terminal;
}

std::unique_ptr<Link> make_descriptor_link(net::any_io_executor executor, Clock& clock, int fd,
                                           DescriptorKind kind, std::string name,
                                           std::function<void(int)> close_fd) {
  auto stream = std::make_shared<Stream>(executor, clock, fd, kind, std::move(close_fd));
  stream->wait_readable();
  return std::make_unique<DescriptorLink>(std::move(stream), clock, std::move(name));
}

std::unique_ptr<Link> adopt_descriptor(net::any_io_executor executor, Clock& clock, int fd,
                                       std::string name) {
  return make_descriptor_link(std::move(executor), clock, fd, kind_of_descriptor(fd), std::move(name),
                              [](int own) { ::close(own); });
}

}  // namespace loadstair::link
