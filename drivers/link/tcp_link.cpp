#include <netinet/in.h>
#include <netinet/tcp.h>
#include <sys/socket.h>
#include <unistd.h>

#include <boost/asio/ip/address.hpp>
#include <boost/asio/ip/tcp.hpp>
#include <boost/asio/this_coro.hpp>
#include <deque>
#include <utility>

#include "analysis/base/number.h"
#include "drivers/link/descriptor_link.h"
#include "drivers/link/notice.h"

namespace loadstair::link {
namespace {

namespace net = boost::asio;
using net::ip::tcp;

/// One attempt to connect. Handlers hold it, so a late answer of the resolver finds it alive.
struct Attempt {
  Attempt(Clock& clock, const net::any_io_executor& executor)
      : changed{clock, executor}, resolver{executor}, socket{executor} {}

  Notice changed;
  tcp::resolver resolver;
  tcp::socket socket;
  bool pending = false;
  boost::system::error_code error;
  std::deque<tcp::endpoint> endpoints;
};

/// Waits for the attempt's operation in progress. Returns: false when the deadline passed first.
net::awaitable<bool> finish(std::shared_ptr<Attempt> attempt, Clock& clock, std::int64_t deadline_ns) {
  while (attempt->pending && clock.now_ns() < deadline_ns) co_await attempt->changed.wait_until(deadline_ns);
  co_return !attempt->pending;
}

void resolve(const std::shared_ptr<Attempt>& attempt, const TcpSettings& settings) {
  attempt->error = {};
  const auto address = net::ip::make_address(settings.host, attempt->error);
  if (!attempt->error) {
    attempt->endpoints.emplace_back(address, static_cast<net::ip::port_type>(settings.port));
    return;
  }
  attempt->pending = true;
  attempt->resolver.async_resolve(
      settings.host, base::print_integer(settings.port),
      [attempt](const boost::system::error_code& error, const tcp::resolver::results_type& results) {
        attempt->pending = false;
        attempt->error = error;
        for (const auto& entry : results) attempt->endpoints.push_back(entry.endpoint());
        attempt->changed.notify();
      });
}

void connect(const std::shared_ptr<Attempt>& attempt) {
  boost::system::error_code ignored;
  attempt->socket.close(ignored);
  attempt->pending = true;
  attempt->socket.async_connect(attempt->endpoints.front(),
                                [attempt](const boost::system::error_code& error) {
                                  attempt->pending = false;
                                  attempt->error = error;
                                  attempt->changed.notify();
                                });
}

/// Small messages leave at once, and a peer that vanished without a word is noticed within half a minute.
void set_options(int fd) {
  const auto set = [fd](int level, int option, int value) {
    setsockopt(fd, level, option, &value, sizeof value);  // a system that lacks one works without
  };
  set(IPPROTO_TCP, TCP_NODELAY, 1);
  set(SOL_SOCKET, SO_KEEPALIVE, 1);
#ifdef TCP_KEEPIDLE
  set(IPPROTO_TCP, TCP_KEEPIDLE, 10);
  set(IPPROTO_TCP, TCP_KEEPINTVL, 5);
  set(IPPROTO_TCP, TCP_KEEPCNT, 4);
#endif
}

}  // namespace

net::awaitable<base::Outcome<std::unique_ptr<Link>>> open_tcp(Clock& clock, TcpSettings settings,
                                                              std::chrono::nanoseconds limit) {
  const auto name = "tcp " + settings.host + ":" + base::print_integer(settings.port);
  if (settings.port < 1 || settings.port > 65535)
    co_return base::Refusal{name, "the port must be 1 to 65535"};
  const auto executor = co_await net::this_coro::executor;
  const auto deadline_ns = clock.now_ns() + limit.count();
  const auto attempt = std::make_shared<Attempt>(clock, executor);

  resolve(attempt, settings);
  if (!co_await finish(attempt, clock, deadline_ns)) {
    attempt->resolver.cancel();
    co_return base::Refusal{
        name, "the host's name was not resolved in time; give its address, or look at the network"};
  }
  if (attempt->error) {
    co_return base::Refusal{
        name, "the host is not known (" + attempt->error.message() + "); check its name or address"};
  }
  for (; !attempt->endpoints.empty(); attempt->endpoints.pop_front()) {
    connect(attempt);
    if (!co_await finish(attempt, clock, deadline_ns)) {
      boost::system::error_code ignored;
      attempt->socket.close(ignored);
      co_return base::Refusal{name, "no connection in time; is the instrument on, and on this network?"};
    }
    if (attempt->error) continue;
    boost::system::error_code error;
    const int fd = attempt->socket.release(error);
    if (error) co_return base::Refusal{name, "the socket could not be taken over (" + error.message() + ")"};
    set_options(fd);
    co_return make_descriptor_link(executor, clock, fd, DescriptorKind::socket, name,
                                   [](int own) { ::close(own); });
  }
  co_return base::Refusal{
      name, "no connection (" + attempt->error.message() + "); is the instrument on, and is this its port?"};
}

}  // namespace loadstair::link
