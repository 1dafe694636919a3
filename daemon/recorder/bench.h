// recorder: owns the instruments; readings in, to the record and to whoever listens, with a recent window per
// channel. Not for deciding anything (sequencer) and not for results (evaluation).
#pragma once

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <cstdint>
#include <exception>
#include <functional>
#include <memory>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"
#include "daemon/recorder/window.h"
#include "daemon/setup/hookup.h"
#include "daemon/store/record.h"
#include "drivers/link/clock.h"
#include "drivers/link/link.h"

namespace loadstair::recorder {

/// A channel as it stands now, for the page and the terminal.
struct ChannelNow {
  std::string name;
  std::string unit;  ///< after conversion
  bool typed = false;
  std::string instrument;              ///< empty: typed
  std::optional<double> value;         ///< last usable one; nullopt: none yet
  std::optional<double> age_s;         ///< of `value`, since the instant it stands for
  std::optional<double> half_width_s;  ///< of its instant
  std::uint32_t flags = 0;             ///< of the last reading, usable or not
  std::vector<std::string> words;      ///< the flags in words ("overload", "no reply"); empty: good
};

/// An instrument as it stands now.
struct InstrumentNow {
  std::string name;
  std::string link;    ///< "serial bench/shunt at 9600 baud"
  std::string state;   ///< "connecting", "ready", "resynchronising", "wrong identity", "watching folder", ...
  bool ready = false;  ///< connected, its identity as declared (or none declared): may be commanded
  std::string identity;  ///< what it said; empty: has not been asked or says nothing
};

/// A new reading of a channel.
struct ChannelUpdate {
  std::size_t channel = 0;  ///< place in Hookup::channels
  Point point;
};

/// The kind of the event that an instrument is not served for a moment: its poll loop ended by a fault of the
/// program, and begins anew. Its source is the instrument.
inline constexpr std::string_view kInstrumentFailed = "instrument failed";

/// What is known of a safe state that was commanded.
enum class SafeHow {
  confirmed,  ///< read back
  sent,       ///< written to the instrument; its profile has no query for it
};

/// Something that happened, for the event lists.
struct BenchEvent {
  std::int64_t t_ns = 0;  ///< monotonic
  std::string kind;       ///< "lost", "guard", "clock step", ... (store::EventItem)
  std::string source;     ///< instrument, guard or part of the program
  std::string text;
};

/// A capture file that was taken in.
struct CaptureArrived {
  std::string instrument, file_name;
  std::int32_t step = -1;   ///< the step it was bound to; -1: to none
  std::size_t samples = 0;  ///< of each channel
  std::size_t channels = 0;
};

struct BenchOptions {
  /// How an instrument's link is opened; empty: the link that the hook-up declares. Not called for folders.
  std::function<link::Opener(const setup::Instrument&)> opener_for;
  /// Runs a job off the I/O thread (files, parsing); empty: in place, as tests in virtual time need it. What
  /// a job found is posted back to the executor.
  std::function<void(std::function<void()>)> background;
  std::int64_t folder_look_ns = 200'000'000;  ///< how often a scope's folder is looked at
  double safe_limit_s = 5.0;            ///< for one control's safe state, with its repeats and reconnections
  std::size_t window_readings = 20000;  ///< kept per channel
  std::size_t events_kept = 200;
};

/// A run as the bench needs to know it.
struct RunOnBench {
  store::RunId run = 0;
  std::int64_t utc_offset_ns = 0;  ///< of the run's start
};

/// Everything here runs on one executor, without locks. The clock, the writer and the executor's context
/// outlive the bench. Start it once, close it once.
class Bench {
 public:
  using Listener = std::uint64_t;

  Bench(setup::Hookup hookup, link::Clock& clock, boost::asio::any_io_executor executor,
        store::Writer& writer, BenchOptions options = {});
  ~Bench();
  Bench(const Bench&) = delete;
  Bench& operator=(const Bench&) = delete;

  /// Starts to connect and to poll; returns at once.
  void start();
  /// Stops polling, drains, closes the links.
  [[nodiscard]] boost::asio::awaitable<void> close();

  [[nodiscard]] const setup::Hookup& hookup() const;
  [[nodiscard]] link::Clock& clock() const;
  [[nodiscard]] store::Writer& writer() const;
  [[nodiscard]] boost::asio::any_io_executor executor() const;
  /// Runs `job` as BenchOptions::background says, then `done` on the executor. What leaves `job` becomes an
  /// event.
  void in_background(std::function<void()> job, std::function<void()> done);

  // --- what is
  [[nodiscard]] std::vector<ChannelNow> channels() const;
  [[nodiscard]] std::vector<InstrumentNow> instruments() const;
  /// Place in Hookup::channels.
  [[nodiscard]] std::optional<std::size_t> find_channel(std::string_view name) const;
  [[nodiscard]] const Window& window(std::size_t channel) const;
  /// The last events, oldest first.
  [[nodiscard]] std::vector<BenchEvent> recent_events() const;
  /// Captures bound to this step of the present run so far.
  [[nodiscard]] std::size_t captures_of_step(std::int32_t step) const;

  // --- live feed; callbacks run on the executor, must be short and must not throw
  Listener on_reading(std::function<void(const ChannelUpdate&)> callback);
  Listener on_event(std::function<void(const BenchEvent&)> callback);
  Listener on_capture(std::function<void(const CaptureArrived&)> callback);
  /// Called when an instrument's state changed.
  Listener on_instrument(std::function<void()> callback);
  void forget(Listener listener);

  // --- the record
  /// Readings are posted from now on until end_run(); before and after, events only (as run 0).
  void begin_run(RunOnBench run);
  void end_run();
  /// This step goes on from now on; -1: none. It takes no captures yet.
  void set_step(std::int32_t step);
  /// Captures that were saved at `since_ns` (monotonic: when the step's own set points were there) or later
  /// belong to the present step, until this is called again; nullopt: to no step, as those saved earlier.
  void accept_captures(std::optional<std::int64_t> since_ns);
  /// Posts an event and tells the listeners. `run`: nullopt, the present one.
  void event(std::string kind, std::string source, std::string text,
             std::optional<store::RunId> run = std::nullopt);
  /// Takes in a typed value, so that the windows and the feed show it too. Nothing is posted.
  void show_typed(std::size_t channel, const Point& raw_point);
  /// Takes in a scope's file as if it had appeared in the folder; parsed in the background, then posted to
  /// the step given. -1: to the running one, if it accepts captures and this one, saved just now, is young
  /// enough; otherwise to no step (-1), with an event.
  void take_capture(std::string instrument, std::string file_name, std::string bytes, std::int32_t step = -1);

  // --- commands to controls, by the control's name. Refusals say what was tried on what and what came
  // instead.
  /// Sets, and reads back where the profile can. Returns the read-back; nullopt: cannot be read back.
  [[nodiscard]] boost::asio::awaitable<base::Outcome<std::optional<double>>> apply(std::string control,
                                                                                   std::string setting,
                                                                                   double value);
  [[nodiscard]] boost::asio::awaitable<base::Outcome<void>> switch_on(std::string control);
  /// Pre-empts whatever the instrument is asked; confirmed by read-back where the profile can.
  [[nodiscard]] boost::asio::awaitable<base::Outcome<SafeHow>> make_safe(std::string control);
  /// Connected, and its identity is as declared.
  [[nodiscard]] bool may_command(std::string_view control) const;

 private:
  struct State;
  std::shared_ptr<State> state_;
};

/// What an exception says of itself, for an event. Precondition: there is one.
[[nodiscard]] std::string said(const std::exception_ptr& failure);

/// The flags of a reading in words; empty: good.
[[nodiscard]] std::vector<std::string> words_of(std::uint32_t flags);

}  // namespace loadstair::recorder
