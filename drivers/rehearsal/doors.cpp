#include <unistd.h>

#include <algorithm>
#include <boost/asio/as_tuple.hpp>
#include <boost/asio/ip/tcp.hpp>
#include <boost/asio/use_awaitable.hpp>
#include <cmath>
#include <cstdio>
#include <fstream>

#include "analysis/base/number.h"
#include "drivers/rehearsal/bench_core.h"
#include "drivers/rehearsal/draws.h"

namespace loadstair::rehearsal {

namespace {

namespace net = boost::asio;
using net::ip::tcp;
constexpr auto kToken = net::as_tuple(net::use_awaitable);
constexpr std::int64_t kSecond_ns = 1'000'000'000;
// Bytes that nobody reads are lost, as on a real line: a system's buffer must not turn them into late ones.
constexpr int kUnreadLimit = 1024;

/// A file name from an instrument's name.
std::string file_name(const std::string& name) {
  std::string out = name;
  for (char& c : out) {
    const bool plain = (c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z') || (c >= '0' && c <= '9') ||
                       c == '-' || c == '_' || c == '.';
    if (!plain) c = '-';
  }
  return out;
}

/// Takes one connection into the station's care.
void welcome(const CorePtr& core, Station& station, std::shared_ptr<link::Link> link) {
  station.links.push_back(link);
  core->tasks.spawn(converse(core, station, std::move(link)));
}

base::Outcome<void> open_pty_door(const CorePtr& core, Station& station) {
  auto pty = open_pty(station.description.baud);
  if (!pty) return pty.refusal();
  station.pty = *pty;
  if (auto named = publish(station.pty.path, published_path(*core, station)); !named) {
    ::close(station.pty.master);
    ::close(station.pty.slave);
    station.pty = {};
    return named.refusal();
  }
  welcome(core, station,
          link::adopt_descriptor(core->executor, core->clock, station.pty.master,
                                 "rehearsed " + station.description.name));
  station.pty.master = -1;  // the link's from here on
  return {};
}

link::Wait accept_all(CorePtr core, Station& station, std::shared_ptr<tcp::acceptor> acceptor) {
  while (acceptor->is_open()) {
    auto [error, socket] = co_await acceptor->async_accept(kToken);
    if (error == net::error::operation_aborted || !acceptor->is_open()) co_return;
    if (error) {
      // Out of descriptors, or the peer gave up already: not a reason to spin.
      co_await core->clock.sleep_for(std::chrono::milliseconds{100});
      continue;
    }
    welcome(core, station,
            link::adopt_descriptor(core->executor, core->clock, socket.release(),
                                   "rehearsed " + station.description.name));
  }
}

base::Outcome<void> open_tcp_door(const CorePtr& core, Station& station) {
  auto acceptor = std::make_shared<tcp::acceptor>(core->executor);
  const tcp::endpoint endpoint{net::ip::address_v4::loopback(), static_cast<unsigned short>(station.port)};
  boost::system::error_code error;
  acceptor->open(endpoint.protocol(), error);
  if (!error) acceptor->set_option(tcp::acceptor::reuse_address(true), error);
  if (!error) acceptor->bind(endpoint, error);
  if (!error) acceptor->listen(net::socket_base::max_listen_connections, error);
  if (error)
    return base::Refusal{"rehearsed instrument \"" + station.description.name + "\"",
                         "no socket on the loopback: " + error.message()};
  station.port = acceptor->local_endpoint().port();
  station.acceptor = acceptor;
  core->tasks.spawn(accept_all(core, station, std::move(acceptor)));
  return {};
}

link::Wait come_back(CorePtr core, Station& station, double length_s) {
  co_await core->clock.sleep_for(std::chrono::nanoseconds{std::llround(length_s * 1e9)});
  if (core->closing) co_return;
  station.away = false;
  const auto opened = open_door(core, station);
  core->note(station, "link", 0, "", "", opened ? "back" : "not back: " + opened.refusal().text());
}

}  // namespace

std::string published_path(const BenchCore& core, const Station& station) {
  return core.description.folder + "/" + file_name(station.description.name);
}

base::Outcome<void> open_door(const CorePtr& core, Station& station) {
  switch (station.description.link) {
    case LinkKind::pty:
      return open_pty_door(core, station);
    case LinkKind::tcp:
      return open_tcp_door(core, station);
    case LinkKind::memory:
    case LinkKind::none:
      break;
  }
  return {};
}

base::Outcome<std::unique_ptr<link::Link>> open_memory(const CorePtr& core, Station& station) {
  const std::string name = "memory " + station.description.name;
  if (core->closing || station.away)
    return base::Refusal{name, "the rehearsed instrument is not there; it may come back"};
  const auto baud = station.description.paced ? std::optional<int>{station.description.baud} : std::nullopt;
  auto [near, far] = link::make_memory_pair(core->executor, core->clock, name, baud);
  welcome(core, station, std::move(far));
  return std::move(near);
}

void close_door(Station& station) {
  if (station.acceptor) {
    boost::system::error_code ignored;
    station.acceptor->close(ignored);
    station.acceptor.reset();
  }
  for (const auto& link : station.links) link->close();
  station.links.clear();
  if (station.pty.slave >= 0) ::close(station.pty.slave);
  station.pty = {};
}

void vanish(const CorePtr& core, Station& station, double length_s) {
  if (station.away || core->closing) return;
  core->note(station, "fault", station.queries, "vanish", "", "");
  station.away = true;
  if (station.description.link == LinkKind::pty) ::unlink(published_path(*core, station).c_str());
  close_door(station);
  core->tasks.spawn(come_back(core, station, length_s));
}

base::Outcome<void> write_endpoints(const BenchCore& core) {
  if (core.description.folder.empty()) return {};
  const std::string path = core.description.folder + "/endpoints";
  const std::string part = path + ".part";
  {
    std::ofstream out{part, std::ios::trunc};
    for (const Endpoint& e : core.endpoints) {
      if (e.link == LinkKind::pty) out << e.instrument << "\tserial\t" << e.path << '\t' << e.baud << '\n';
      if (e.link == LinkKind::tcp) out << e.instrument << "\ttcp\t" << e.host << '\t' << e.port << '\n';
    }
    out << std::flush;
    if (!out) return base::Refusal{path, "cannot be written; is the folder there and writable?"};
  }
  if (std::rename(part.c_str(), path.c_str()) != 0)
    return base::Refusal{path, "cannot be replaced; is something else there?"};
  return {};
}

std::string garbage(const BenchCore& core, const Station& station, std::size_t length) {
  Pcg32 draw{key_of(core.description.seed, station.description.name + " garbage",
                    {static_cast<std::uint64_t>(station.queries), static_cast<std::uint64_t>(station.lines)}),
             1};
  std::string bytes(length, '\0');
  for (char& c : bytes) {
    do {
      c = static_cast<char>(draw.next() & 0xffU);
    } while (c == '\n' || c == '\r');
  }
  return bytes;
}

net::awaitable<bool> send(CorePtr core, Station& station, std::shared_ptr<link::Link> link,
                          std::string bytes) {
  const std::int64_t now = core->clock.now_ns();
  if (station.description.link != LinkKind::pty) {
    const link::Status status = co_await link->write(std::move(bytes), now + kSecond_ns);
    co_return status == link::Status::done;
  }
  if (unread(station.pty.slave) > kUnreadLimit) co_return false;
  if (rate_differs(station.pty.slave, station.description.baud))
    bytes = garbage(*core, station, bytes.size());
  // Ten bits a byte. The first byte goes alone, since its instant is looked at; the rest in pieces of 4 ms.
  const std::int64_t byte_ns = 10 * kSecond_ns / std::max(station.description.baud, 1);
  const auto piece = static_cast<std::size_t>(std::max<std::int64_t>(1, 4'000'000 / byte_ns));
  std::size_t sent = 0;
  while (sent < bytes.size()) {
    const std::size_t count = sent == 0 ? 1 : std::min(piece, bytes.size() - sent);
    co_await core->clock.sleep_until(now + byte_ns * static_cast<std::int64_t>(sent + count));
    const link::Status status =
        co_await link->write(bytes.substr(sent, count), core->clock.now_ns() + kSecond_ns);
    if (status != link::Status::done) co_return false;
    sent += count;
  }
  co_return true;
}

}  // namespace loadstair::rehearsal
