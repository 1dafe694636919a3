// One instrument on one link: it is opened, recognised, asked in turn, commanded, made safe, and found again.
#pragma once

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <memory>
#include <optional>
#include <string>

#include "drivers/instrument/profile.h"
#include "drivers/instrument/reading.h"
#include "drivers/instrument/sink.h"
#include "drivers/link/clock.h"
#include "drivers/link/link.h"

namespace loadstair::instrument {

/// What the hook-up file says of this one instrument. Times in seconds.
struct InstrumentSettings {
  std::string name;      ///< "output voltmeter", for messages
  std::string identity;  ///< what its identity must begin with; empty: whatever is not a number
  double poll_s =
      0.5;  ///< one round of the profile's queries starts at every multiple of this; at least 1 ms
  double update_s = 0.0;  ///< between two conversions of a free-running meter; of lines: between two lines
  double integration_s = 0.0;  ///< length of one conversion
  double delay_s = 0.0;        ///< from the end of a conversion to when it can be asked for
  double retry_s = 0.25;  ///< first wait before a lost link is opened again; doubles up to retry_most_s, but
                          ///< not beyond 1 s while its safe state is not confirmed
  double retry_most_s = 5.0;
  double command_limit_s = 5.0;  ///< for `apply` and `switch_on`, waiting for a lost link included
  double safe_limit_s = 10.0;    ///< for `make_safe`
};

/// What became of a command.
enum class CommandState {
  confirmed,    ///< read back as it should be
  sent,         ///< written; the profile has no way to read it back
  refused,      ///< read back as something else, or not possible by the profile, or overtaken by `make_safe`
  unreachable,  ///< no confirmation in time: link lost, silent, or identity wrong
};

struct CommandOutcome {
  CommandState state = CommandState::unreachable;
  std::string text;                 ///< for a person: what was tried, on what, what came instead
  std::optional<double> read_back;  ///< as read, in the setting's unit, where a number was read
};

enum class State {
  idle,             ///< `run` has not begun
  connecting,       ///< opening, asking for the identity, or waiting to try again
  wrong_identity,   ///< something else answered; waiting to try again, nothing is sent but the identity query
  ready,            ///< asked in turn, or its lines are read
  resynchronising,  ///< late bytes are thrown away
  stopped,
};
[[nodiscard]] std::string_view name_of(State state);

/// Everything happens on one executor, without locks, on a real or a virtual clock.
///
/// A reply is never taken for the answer to another query. After a timeout, a reply that cannot be read, or
/// bytes that nobody asked for, nothing is believed until the line has been silent for a while and the
/// identity query has been answered by exactly the identity that this connection began with; every other line
/// is thrown away. Why that is enough: an instrument answers in the order of the questions (IEEE
/// 488.2-1992, 6.4), so what is late comes before the identity, however late it is; and a measurement can
/// never look like the identity. An identity that is itself late (two were asked for) would be read as the
/// reply to the next measurement: it is no number, counts as invalid, and starts the procedure again. What
/// remains: a line that an instrument sends twice, the copy later than the pause between two queries of one
/// round and sooner than the next reply.
class Instrument {
 public:
  /// Nothing is opened yet. `clock`, `sink` and the instrument outlive `run` and every command in progress.
  /// Precondition: `check_profile(profile)` is ok; otherwise BrokenPromise.
  Instrument(boost::asio::any_io_executor executor, link::Clock& clock, link::Opener opener, Profile profile,
             InstrumentSettings settings, Sink& sink);
  ~Instrument();
  Instrument(const Instrument&) = delete;
  Instrument& operator=(const Instrument&) = delete;

  /// Opens, polls and re-opens until `stop`. Once only.
  [[nodiscard]] boost::asio::awaitable<void> run();

  /// Sets one of the profile's settings and reads it back, between two queries. A mismatch is sent once more.
  /// value  in the setting's unit; a switch takes 0 or 1.
  [[nodiscard]] boost::asio::awaitable<CommandOutcome> apply(std::string setting, double value);

  /// Sends the profile's on_commands. Confirmed when the safe state's query then answers anything but "safe".
  [[nodiscard]] boost::asio::awaitable<CommandOutcome> switch_on();

  /// Makes the instrument harmless. Written at once, even while a reply is outstanding; waiting commands are
  /// refused; after resynchronisation written again where a reply was outstanding, then read back and
  /// retried, over reconnections too, until confirmed or `safe_limit_s` has passed. Never sent to an
  /// instrument whose identity did not match. A second call while one is at work joins it.
  [[nodiscard]] boost::asio::awaitable<CommandOutcome> make_safe();

  /// Ends `run` soon: the link is closed, waiting commands end as unreachable. Does not make safe.
  /// Idempotent.
  void stop();

  [[nodiscard]] State state() const;
  [[nodiscard]] const std::string& identity() const;  ///< of the present or last connection
  [[nodiscard]] const Profile& profile() const;
  [[nodiscard]] const InstrumentSettings& settings() const;

 private:
  class Impl;
  std::shared_ptr<Impl> impl_;  ///< coroutines that were never finished hold it too
};

}  // namespace loadstair::instrument
