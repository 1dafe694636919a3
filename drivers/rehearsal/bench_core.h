// What the conversations of one rehearsed bench share: the simulator, the log, the links. Owned by
// shared_ptr, since coroutines may outlive the RehearsedBench that started them by a turn.
#pragma once

#include <boost/asio/ip/tcp.hpp>
#include <boost/asio/local/stream_protocol.hpp>
#include <memory>
#include <string>
#include <vector>

#include "drivers/link/notice.h"
#include "drivers/link/task_scope.h"
#include "drivers/rehearsal/bench.h"
#include "drivers/rehearsal/pty.h"
#include "drivers/rehearsal/scpi_device.h"
#include "drivers/rehearsal/simulator.h"

namespace loadstair::rehearsal {

/// One instrument and its doors to the world.
struct Station {
  Station(const InstrumentDescription& d, std::size_t i) : description{d}, index{i}, device{d} {
    own_settings.resize(d.settings.size());
  }

  const InstrumentDescription& description;
  std::size_t index;
  ScpiDevice device;
  FaultPlan plan;
  std::int64_t queries = 0;
  std::int64_t commands = 0;
  std::int64_t lines = 0;
  std::string last_reply;
  std::vector<double> own_settings;  ///< of settings that turn no knob
  int captures = 0;
  int captures_pending = 0;
  bool away = false;  ///< vanished
  std::vector<std::shared_ptr<link::Link>> links;
  Pty pty;
  std::shared_ptr<boost::asio::ip::tcp::acceptor> acceptor;
  int port = 0;
};

class BenchCore : public std::enable_shared_from_this<BenchCore> {
 public:
  BenchCore(boost::asio::any_io_executor executor, link::Clock& clock, BenchDescription description);

  boost::asio::any_io_executor executor;
  link::Clock& clock;
  const BenchDescription description;
  Simulator simulator;
  ReplyLog log;
  std::vector<std::unique_ptr<Station>> stations;
  std::vector<Endpoint> endpoints;
  std::vector<TruthWindow> windows;
  std::shared_ptr<boost::asio::local::stream_protocol::acceptor> control;
  link::TaskScope tasks;
  link::Notice stop_notice;
  bool stop_asked = false;
  bool closing = false;
  std::int64_t start_ns = 0;
  std::int64_t start_utc_offset_ns = 0;

  /// Seconds since the bench started, now or at a monotonic instant.
  [[nodiscard]] double now_s() const { return seconds(clock.now_ns()); }
  [[nodiscard]] double seconds(std::int64_t t_ns) const {
    return 1e-9 * static_cast<double>(t_ns - start_ns);
  }
  [[nodiscard]] Station* find(const std::string& instrument);
  /// Adds a line to the log, sent now.
  void note(const Station& station, std::string kind, std::int64_t number, std::string fault,
            std::string query, std::string reply);

  [[nodiscard]] base::Outcome<void> check() const;
  [[nodiscard]] base::Outcome<void> perform(const std::string& actions);
  void inject(Fault fault);
  [[nodiscard]] base::Outcome<Truth> truth_over(std::int64_t from_ns, std::int64_t to_ns);
  [[nodiscard]] base::Outcome<void> write_truth(const std::string& path,
                                                const std::vector<TruthWindow>& asked);
  void ask_to_stop();
};

using CorePtr = std::shared_ptr<BenchCore>;

// Doors (doors.cpp): ptys, sockets and memory; opening, vanishing, coming back, ending.
[[nodiscard]] base::Outcome<void> open_door(const CorePtr& core, Station& station);
[[nodiscard]] base::Outcome<std::unique_ptr<link::Link>> open_memory(const CorePtr& core, Station& station);
void close_door(Station& station);
/// Closes the station's door for `length_s` in a task of its own.
void vanish(const CorePtr& core, Station& station, double length_s);
/// FOLDER/NAME of a pty: the instrument's name with everything but letters, digits, '-', '_' and '.' as '-'.
[[nodiscard]] std::string published_path(const BenchCore& core, const Station& station);
[[nodiscard]] base::Outcome<void> write_endpoints(const BenchCore& core);
/// Writes `bytes`, paced to the rate of a pty and garbled when the other side has another one. False when
/// they did not go out: link closed, or nobody reads.
[[nodiscard]] boost::asio::awaitable<bool> send(CorePtr core, Station& station,
                                                std::shared_ptr<link::Link> link, std::string bytes);
/// Bytes of an instrument's reply as a wrong rate or a fault leaves them: none of them a line end.
[[nodiscard]] std::string garbage(const BenchCore& core, const Station& station, std::size_t length);

// Conversations.
[[nodiscard]] link::Wait converse(CorePtr core, Station& station, std::shared_ptr<link::Link> link);
[[nodiscard]] link::Wait print_lines(CorePtr core, Station& station);
[[nodiscard]] boost::asio::awaitable<base::Outcome<std::string>> capture(CorePtr core, Station& station);
[[nodiscard]] boost::asio::awaitable<base::Outcome<TypedAnswer>> typed_answer(CorePtr core,
                                                                              std::string channel);
[[nodiscard]] base::Outcome<void> open_control(const CorePtr& core);

}  // namespace loadstair::rehearsal
