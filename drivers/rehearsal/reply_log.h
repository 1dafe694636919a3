// The rehearsal's own log: every reply with the query that it answers and the time it was sent, and every
// fault. Tests join it to the record ("no wrong value stored as good").
#pragma once

#include <cstdint>
#include <fstream>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"

namespace loadstair::rehearsal {

/// One line of the log: tab separated, in this order. Control characters, tabs and backslashes in `query` and
/// `reply` are written as \t, \n, \r, \\ and \xHH.
struct LogEntry {
  std::int64_t sent_ns = 0;       ///< monotonic: the first byte of the reply goes out
  std::int64_t sent_wall_ns = 0;  ///< UTC since 1970
  std::string instrument;
  std::string kind;  ///< "reply", "line" (unsolicited), "set", "fault", "hand", "typed", "capture", "link"
  std::int64_t number = 0;  ///< of the query, or of the line, at this instrument
  std::string fault;        ///< what altered this reply; empty: nothing did
  std::string query;
  std::string reply;  ///< the bytes as sent, without the terminator; empty: nothing was sent
};

class ReplyLog {
 public:
  /// Appends to `path` as well, line by line, when it is not empty. Refusal: the file cannot be opened.
  [[nodiscard]] base::Outcome<void> open(const std::string& path);
  void add(LogEntry entry);
  [[nodiscard]] const std::vector<LogEntry>& entries() const { return entries_; }

 private:
  std::vector<LogEntry> entries_;
  std::ofstream file_;
};

[[nodiscard]] std::string print_entry(const LogEntry& entry);
[[nodiscard]] base::Outcome<LogEntry> parse_entry(std::string_view line);

}  // namespace loadstair::rehearsal
