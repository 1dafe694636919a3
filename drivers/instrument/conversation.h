// The bytes' side of an instrument: one link, one question at a time, and how to get back in step.
#pragma once

#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>
#include <functional>
#include <memory>
#include <string>

#include "drivers/instrument/profile.h"
#include "drivers/instrument/reading.h"
#include "drivers/link/clock.h"
#include "drivers/link/link.h"
#include "drivers/link/notice.h"

namespace loadstair::instrument {

/// Tells of something that happened.
using Tell = std::function<void(EventKind, std::string)>;

/// Used by one coroutine, except for `interject` and `close`, which others may call while it waits.
class Conversation {
 public:
  enum class End {
    answered,
    unreadable,   ///< a line without end
    timeout,      ///< no reply in time: resynchronise before anything else
    out_of_step,  ///< nothing was asked, since bytes were there that nobody asked for: resynchronise
    closed,
  };
  struct Answer {
    End end = End::closed;
    std::string text;
    std::int64_t sent_ns = 0;   ///< before the query's first byte
    std::int64_t first_ns = 0;  ///< first byte of the reply; without one, when waiting ended
    std::int64_t last_ns = 0;
  };
  enum class Recognised { matched, wrong, silent, closed };

  Conversation(boost::asio::any_io_executor executor, link::Clock& clock, const Profile& profile,
               std::string wanted_identity, Tell tell);

  /// Goes on over this link, of which nothing is known.
  void begin(std::unique_ptr<link::Link> link);
  /// Ends every read and write in progress.
  void close();
  [[nodiscard]] link::Link* link() const { return link_.get(); }

  /// Does what answers have the identity wanted? Written besides the identity query: nothing.
  [[nodiscard]] boost::asio::awaitable<Recognised> identify();
  /// The identity query was answered as it should be, on this link.
  [[nodiscard]] bool identified() const { return identified_ && link_ != nullptr; }
  /// The reply to the identity query, of this link or the one before.
  [[nodiscard]] const std::string& identity() const { return identity_; }

  /// A query and its reply. Asks nothing when bytes are there before it.
  [[nodiscard]] boost::asio::awaitable<Answer> ask(std::string query);
  /// A command without reply. Returns: false when the link has gone.
  [[nodiscard]] boost::asio::awaitable<bool> say(std::string command);
  /// The pause between two queries of one round, in which a line that was sent twice shows itself.
  [[nodiscard]] link::Wait pause_between();
  /// Throws late bytes away until the line is silent, then until the identity is answered.
  /// Returns: false when the link has gone, never falls silent, or another identity or none answers.
  [[nodiscard]] boost::asio::awaitable<bool> resynchronise();

  /// Writes at once, a reply outstanding or not. Only after `identified`. Returns: false when the link has
  /// gone.
  [[nodiscard]] boost::asio::awaitable<bool> interject(std::string bytes);
  /// A question was asked and its answer is not here yet, or the line is not in step.
  [[nodiscard]] bool unsettled() const { return unsettled_; }
  [[nodiscard]] bool resynchronising() const { return resynchronising_; }

 private:
  [[nodiscard]] boost::asio::awaitable<bool> write(std::string bytes);
  [[nodiscard]] boost::asio::awaitable<bool> await_silence();
  [[nodiscard]] boost::asio::awaitable<bool> silence_then_identity();
  [[nodiscard]] boost::asio::awaitable<Recognised> ask_identity(std::int64_t deadline_ns);
  [[nodiscard]] bool is_wanted(std::string_view line) const;
  [[nodiscard]] std::int64_t timeout_ns() const;

  boost::asio::any_io_executor executor_;
  link::Clock& clock_;
  const Profile& profile_;
  std::string wanted_identity_;
  Tell tell_;
  std::shared_ptr<link::Link> link_;
  link::Notice write_ended_;
  bool writing_ = false;
  bool identified_ = false;
  bool unsettled_ = false;
  bool resynchronising_ = false;
  std::string identity_;
  std::string stranger_;         ///< the last line that was not the identity wanted
  std::size_t thrown_away_ = 0;  ///< lines, since the line got out of step
};

}  // namespace loadstair::instrument
