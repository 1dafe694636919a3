// The bench's inside: one object on one executor.
//   bench.cpp    what the public functions do    intake.cpp  readings, events, captures, the clock
#pragma once

#include <deque>
#include <map>
#include <memory>
#include <set>
#include <string>
#include <utility>
#include <vector>

#include "daemon/recorder/bench.h"
#include "daemon/recorder/folder_watch.h"
#include "drivers/instrument/instrument.h"
#include "drivers/link/task_scope.h"

namespace loadstair::recorder {

/// Callbacks by number. A callback may forget itself or others while it runs.
template <class... Arguments>
class Callbacks {
 public:
  using Callback = std::function<void(Arguments...)>;
  void add(std::uint64_t number, Callback callback) {
    callbacks_.emplace_back(number, std::make_shared<Callback>(std::move(callback)));
  }
  void remove(std::uint64_t number) {
    std::erase_if(callbacks_, [number](const auto& one) { return one.first == number; });
  }
  void call(const Arguments&... arguments) const {
    const auto now = callbacks_;
    for (const auto& [number, callback] : now) (*callback)(arguments...);
  }

 private:
  std::vector<std::pair<std::uint64_t, std::shared_ptr<Callback>>> callbacks_;
};

struct Bench::State : std::enable_shared_from_this<Bench::State> {
  /// An instrument, or a scope's folder.
  struct Owned : instrument::Sink {
    State* bench = nullptr;
    std::size_t place = 0;                               ///< in Hookup::instruments
    instrument::Profile profile;                         ///< as it is asked: without what nobody uses
    std::unique_ptr<instrument::Instrument> instrument;  ///< empty: a folder
    std::shared_ptr<FolderWatch> folder;                 ///< empty: an instrument
    std::vector<std::vector<std::int32_t>> channels_of;  ///< by value index: the channels that use it
    void on_exchange(const instrument::Exchange& exchange) override { bench->take_exchange(*this, exchange); }
    void on_event(const instrument::Event& event) override { bench->take_event(*this, event); }
  };

  State(setup::Hookup the_hookup, link::Clock& the_clock, boost::asio::any_io_executor the_executor,
        store::Writer& the_writer, BenchOptions the_options);
  void build();
  void make_instrument(Owned& one);
  boost::asio::awaitable<void> serve(std::size_t place);
  void tell_fault(std::string kind, std::string source, std::string text);

  // --- intake.cpp
  void take_exchange(const Owned& owned, const instrument::Exchange& exchange);
  void take_event(const Owned& owned, const instrument::Event& event);
  void take_point(std::size_t channel, Point point);
  [[nodiscard]] std::optional<double> cold_junction(const setup::Channel& channel) const;
  void tell(std::int64_t t_ns, std::string kind, std::string source, std::string text,
            std::optional<store::RunId> for_run);
  void post_event(store::EventItem item);
  boost::asio::awaitable<void> watch_clock();
  boost::asio::awaitable<void> watch_folder(std::size_t place);
  void take_capture(std::string instrument, std::string file_name, std::string bytes, std::int32_t for_step,
                    std::int64_t saved_ns);
  [[nodiscard]] std::string why_unbound(std::int64_t saved_ns) const;
  void in_background(std::function<void()> job, std::function<void()> done);

  [[nodiscard]] instrument::Instrument* instrument_of(std::string_view control) const;

  setup::Hookup hookup;
  link::Clock& clock;
  boost::asio::any_io_executor executor;
  store::Writer& writer;
  BenchOptions options;
  link::TaskScope polls;                      ///< the instruments' own loops: told to stop, then awaited
  link::TaskScope watches;                    ///< clock and folders: cancelled
  std::vector<std::unique_ptr<Owned>> owned;  ///< as in Hookup::instruments
  std::vector<Window> windows;                ///< as in Hookup::channels
  std::vector<Point> last_usable;             ///< arrived_ns 0: none yet
  std::deque<BenchEvent> events;
  RunOnBench run;  ///< run 0: none
  std::int32_t step = -1;
  std::optional<std::int64_t>
      accept_since_ns;  ///< captures saved from then on belong to `step`; nullopt: none do
  std::map<std::int32_t, std::size_t> captures;               ///< by step of the present run
  std::set<std::pair<std::uint64_t, std::uint64_t>> digests;  ///< of the present run's captures
  bool closed = false;
  Listener next_listener = 1;
  Callbacks<ChannelUpdate> reading_callbacks;
  Callbacks<BenchEvent> event_callbacks;
  Callbacks<CaptureArrived> capture_callbacks;
  Callbacks<> instrument_callbacks;
};

}  // namespace loadstair::recorder
