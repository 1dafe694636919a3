#include "drivers/rehearsal/reply_log.h"

#include <array>

#include "analysis/base/number.h"

namespace loadstair::rehearsal {

namespace {

constexpr std::size_t kFields = 8;
constexpr std::string_view kHex = "0123456789abcdef";

std::string escaped(std::string_view text) {
  std::string out;
  out.reserve(text.size());
  for (const char c : text) {
    const auto byte = static_cast<unsigned char>(c);
    if (c == '\t') {
      out += "\\t";
    } else if (c == '\n') {
      out += "\\n";
    } else if (c == '\r') {
      out += "\\r";
    } else if (c == '\\') {
      out += "\\\\";
    } else if (byte < 0x20 || byte >= 0x7f) {
      out += "\\x";
      out += kHex[byte >> 4U];
      out += kHex[byte & 15U];
    } else {
      out += c;
    }
  }
  return out;
}

std::optional<std::string> unescaped(std::string_view text) {
  std::string out;
  for (std::size_t i = 0; i < text.size(); ++i) {
    if (text[i] != '\\') {
      out += text[i];
      continue;
    }
    if (++i == text.size()) return std::nullopt;
    if (text[i] == 't') {
      out += '\t';
    } else if (text[i] == 'n') {
      out += '\n';
    } else if (text[i] == 'r') {
      out += '\r';
    } else if (text[i] == '\\') {
      out += '\\';
    } else if (text[i] == 'x' && i + 2 < text.size()) {
      const std::size_t high = kHex.find(text[i + 1]);
      const std::size_t low = kHex.find(text[i + 2]);
      if (high == std::string_view::npos || low == std::string_view::npos) return std::nullopt;
      out += static_cast<char>(high * 16 + low);
      i += 2;
    } else {
      return std::nullopt;
    }
  }
  return out;
}

}  // namespace

std::string print_entry(const LogEntry& entry) {
  return base::print_integer(entry.sent_ns) + "\t" + base::print_integer(entry.sent_wall_ns) + "\t" +
         escaped(entry.instrument) + "\t" + entry.kind + "\t" + base::print_integer(entry.number) + "\t" +
         entry.fault + "\t" + escaped(entry.query) + "\t" + escaped(entry.reply);
}

base::Outcome<LogEntry> parse_entry(std::string_view line) {
  std::array<std::string_view, kFields> field;
  for (std::size_t i = 0; i < kFields; ++i) {
    const std::size_t end = i + 1 < kFields ? line.find('\t') : line.size();
    if (end == std::string_view::npos)
      return base::Refusal{"field " + base::print_integer(static_cast<std::int64_t>(i) + 1),
                           "a line of the log has 8 fields between tabs"};
    field[i] = line.substr(0, end);
    line.remove_prefix(std::min(end + 1, line.size()));
  }
  const auto sent = base::parse_integer(field[0]);
  const auto wall = base::parse_integer(field[1]);
  const auto number = base::parse_integer(field[4]);
  const auto instrument = unescaped(field[2]);
  const auto query = unescaped(field[6]);
  const auto reply = unescaped(field[7]);
  if (!sent || !wall || !number || !instrument || !query || !reply)
    return base::Refusal{"", "a number or an escape of this line of the log cannot be read"};
  return LogEntry{*sent,  *wall, *instrument, std::string{field[3]}, *number, std::string{field[5]},
                  *query, *reply};
}

base::Outcome<void> ReplyLog::open(const std::string& path) {
  if (path.empty()) return {};
  file_.open(path, std::ios::app);
  if (!file_)
    return base::Refusal{path,
                         "the rehearsal's log cannot be written there; is the folder there and writable?"};
  return {};
}

void ReplyLog::add(LogEntry entry) {
  if (file_.is_open()) file_ << print_entry(entry) << '\n' << std::flush;
  entries_.push_back(std::move(entry));
}

}  // namespace loadstair::rehearsal
