// A small SCPI responder on memory links, for tests: answers queries, takes commands, and misbehaves on
// demand.
#pragma once

#include <algorithm>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <cmath>
#include <functional>
#include <map>
#include <memory>
#include <string>
#include <vector>

#include "drivers/link/link.h"
#include "drivers/link/task_scope.h"

namespace loadstair::testing {

class FakeInstrument {
 public:
  enum class Fault {
    none,
    silent,   ///< hears and obeys, says nothing
    late,     ///< every reply `late_s` later
    garbage,  ///< every reply is noise
  };
  struct Heard {
    std::int64_t t_ns;
    std::string line;
  };

  FakeInstrument(boost::asio::any_io_executor executor, link::Clock& clock, std::string identity)
      : executor_{executor}, clock_{clock}, tasks_{executor, [](std::exception_ptr e) {
                                                     std::rethrow_exception(e);
                                                   }} {
    answers["*IDN?"] = [identity] { return identity; };
    answers["*OPC?"] = [] { return std::string{"1"}; };
  }

  std::map<std::string, std::function<std::string()>> answers;  ///< by query
  std::function<void(const std::string&)> on_command = [](const std::string&) {};
  Fault fault = Fault::none;
  double late_s = 1.5;
  std::vector<Heard> heard;

  link::Opener opener() {
    return [this]() -> boost::asio::awaitable<base::Outcome<std::unique_ptr<link::Link>>> {
      if (gone_) co_return base::Refusal{"fake", "unplugged"};
      auto [ours, theirs] = link::make_memory_pair(executor_, clock_, "memory");
      peer_ = std::move(ours);
      tasks_.spawn(serve(peer_));
      co_return std::move(theirs);
    };
  }
  /// Unplugged: the link closes, and cannot be opened.
  void vanish() {
    gone_ = true;
    if (peer_) peer_->close();
  }
  void come_back() { gone_ = false; }
  void close() {
    vanish();
    tasks_.cancel();
  }
  [[nodiscard]] std::size_t count(const std::string& line) const {
    return static_cast<std::size_t>(
        std::count_if(heard.begin(), heard.end(), [&line](const Heard& one) { return one.line == line; }));
  }
  /// Instant at which a line was heard for the last time; -1: never.
  [[nodiscard]] std::int64_t last(const std::string& line) const {
    std::int64_t t_ns = -1;
    for (const auto& one : heard) {
      if (one.line == line) t_ns = one.t_ns;
    }
    return t_ns;
  }

 private:
  boost::asio::awaitable<void> serve(std::shared_ptr<link::Link> peer) {
    while (true) {
      const auto received = co_await peer->read_line("\n", INT64_MAX);
      if (received.status == link::Status::closed) co_return;
      if (received.status != link::Status::done) continue;
      heard.push_back({clock_.now_ns(), received.bytes});
      const auto answer = answers.find(received.bytes);
      if (answer == answers.end()) {
        on_command(received.bytes);
        continue;
      }
      auto reply = answer->second();
      if (fault == Fault::silent) continue;
      if (fault == Fault::garbage) reply = "\x11#%~7";
      if (fault == Fault::late)
        co_await clock_.sleep_for(std::chrono::nanoseconds{std::llround(late_s * 1e9)});
      co_await clock_.sleep_for(std::chrono::milliseconds{2});
      if (co_await peer->write(reply + "\n", INT64_MAX) != link::Status::done) co_return;
    }
  }

  boost::asio::any_io_executor executor_;
  link::Clock& clock_;
  link::TaskScope tasks_;
  std::shared_ptr<link::Link> peer_;
  bool gone_ = false;
};

}  // namespace loadstair::testing
