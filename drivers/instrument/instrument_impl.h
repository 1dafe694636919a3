// The inside of Instrument, shared by its sources.
#pragma once

#include <deque>
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "drivers/instrument/conversation.h"
#include "drivers/instrument/instrument.h"
#include "drivers/instrument/interpreter.h"
#include "drivers/link/notice.h"

namespace loadstair::instrument {

namespace net = boost::asio;

class Instrument::Impl {
 public:
  Impl(net::any_io_executor executor, link::Clock& clock, link::Opener opener, Profile profile,
       InstrumentSettings settings, Sink& sink);

  net::awaitable<void> run();
  net::awaitable<CommandOutcome> apply(std::string setting, double value);
  net::awaitable<CommandOutcome> switch_on();
  net::awaitable<CommandOutcome> make_safe();
  void stop();
  /// The owner goes, and with it sink and clock: nothing more is told.
  void abandon();

  [[nodiscard]] State state() const;
  [[nodiscard]] const std::string& identity() const { return talk_.identity(); }
  [[nodiscard]] const Profile& profile() const { return profile_; }
  [[nodiscard]] const InstrumentSettings& settings() const { return settings_; }

 private:
  /// A command on its way. Held by whoever waits for it and by the queue.
  struct Job {
    const ProfileSetting* setting = nullptr;  ///< nullptr: switch on, or make safe
    double value = 0.0;
    std::int64_t deadline_ns = 0;
    bool resynchronise_first = false;  ///< make safe: a reply was outstanding when it was written
    bool written = false;              ///< make safe: the commands are with the instrument
    std::optional<CommandOutcome> outcome;
    std::vector<std::shared_ptr<link::Notice>> waiters;
  };
  using JobPointer = std::shared_ptr<Job>;
  /// What a command's query said.
  struct ReadBack {
    bool link_lost = false;
    std::optional<std::string> text;
  };

  // instrument.cpp: the life of a connection
  net::awaitable<bool> converse();
  net::awaitable<bool> recognise();
  net::awaitable<bool> send_start_commands();
  net::awaitable<void> serve_queries();
  net::awaitable<bool> serve_lines();
  net::awaitable<bool> ask_query(std::size_t query);
  net::awaitable<Conversation::Answer> ask_in_step(std::string query);
  net::awaitable<bool> back_in_step();
  net::awaitable<void> pause(std::int64_t length_ns);
  void lose(std::string why);
  void tell(EventKind kind, std::string text);
  void deliver(const Conversation::Answer& answer, std::string query, std::vector<Reading> readings);

  // polling.cpp
  net::awaitable<bool> round();
  net::awaitable<bool> check_presence();
  net::awaitable<bool> check_function();

  // commands.cpp
  net::awaitable<CommandOutcome> enqueue(const ProfileSetting* setting, double value);
  net::awaitable<CommandOutcome> wait_for(JobPointer job);
  net::awaitable<bool> do_job();
  net::awaitable<bool> do_set(JobPointer job);
  net::awaitable<bool> do_switch_on(JobPointer job);
  net::awaitable<bool> confirm_on(JobPointer job);
  net::awaitable<bool> do_safe();
  net::awaitable<bool> write_safe(JobPointer job);
  net::awaitable<ReadBack> read_back(std::string query);
  [[nodiscard]] CommandOutcome judge_read_back(const Job& job, const std::string& text) const;
  [[nodiscard]] bool is_safe_reply(std::string_view text) const;
  [[nodiscard]] bool is_on_reply(std::string_view text) const;
  void finish(const JobPointer& job, CommandState state, std::string text,
              std::optional<double> read_back = {});
  void finish_waiting(CommandState state, const std::string& text);
  [[nodiscard]] std::string describe(const Job& job) const;

  net::any_io_executor executor_;
  link::Clock& clock_;
  link::Opener opener_;
  Profile profile_;
  InstrumentSettings settings_;
  Sink& sink_;
  Conversation talk_;
  Interpreter interpreter_;
  link::Notice wake_;
  State state_ = State::idle;
  bool began_ = false;
  bool stopping_ = false;
  bool abandoned_ = false;
  std::string
      strange_function_;      ///< what it said of its function, when that was another; empty: the right one
  std::string last_trouble_;  ///< told once while connecting fails again and again
  std::int64_t tick_ns_ = 0;  ///< the next round of queries
  std::deque<JobPointer> waiting_;
  JobPointer at_work_;
  JobPointer safe_;
  bool safe_owed_ = false;  ///< asked to be made safe, and not known to be
};

}  // namespace loadstair::instrument
