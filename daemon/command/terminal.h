// What a command knows about the terminal it talks to.
#pragma once

#include <optional>
#include <string>

namespace loadstair::command {

[[nodiscard]] bool output_is_terminal();
[[nodiscard]] bool input_is_terminal();

/// Emphasis on a terminal, plain text in a pipe or with NO_COLOR set.
[[nodiscard]] std::string bold(const std::string& text);

/// Progress: on a terminal (unless TERM is dumb) one line that is written over; in a pipe a line whenever the
/// text without its countdown changes.
class Progress {
 public:
  /// fixed: what is going on; moving: the part that changes all the time ("still 4 s").
  void show(const std::string& fixed, const std::string& moving);
  /// Ends the line in progress, so that something else can be printed.
  void finish_line();

 private:
  std::string shown_;
  bool open_ = false;
};

/// One line typed by the person, if one is complete within `limit_ms`; nullopt otherwise, also at the end of
/// input.
class LineInput {
 public:
  [[nodiscard]] std::optional<std::string> next(int limit_ms);
  [[nodiscard]] bool ended() const { return ended_; }
  /// Throws away what was typed before a question was asked (at a terminal only: a pipe's lines were meant).
  void discard();

 private:
  std::string pending_;
  bool ended_ = false;
};

/// SIGINT, SIGTERM and SIGHUP set a flag from here on, so that a command can end in order.
void catch_interrupts();
[[nodiscard]] bool interrupted();

}  // namespace loadstair::command
