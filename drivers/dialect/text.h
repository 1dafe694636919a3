// Blanks and letters, independent of any locale. Shared by the parsers of this room.
#pragma once

#include <string>
#include <string_view>

namespace loadstair::dialect {

[[nodiscard]] constexpr bool is_blank(char c) {
  return c == ' ' || c == '\t' || c == '\r' || c == '\n';
}
[[nodiscard]] constexpr bool is_digit(char c) {
  return c >= '0' && c <= '9';
}
[[nodiscard]] constexpr char to_lower(char c) {
  return c >= 'A' && c <= 'Z' ? static_cast<char>(c - 'A' + 'a') : c;
}

[[nodiscard]] constexpr std::string_view trim(std::string_view text) {
  while (!text.empty() && is_blank(text.front())) text.remove_prefix(1);
  while (!text.empty() && is_blank(text.back())) text.remove_suffix(1);
  return text;
}

/// A foreign text for a message: short, and without what a terminal would obey.
[[nodiscard]] inline std::string printable(std::string_view text) {
  constexpr std::size_t kMost = 60;
  std::string shown;
  for (const char c : text.substr(0, kMost)) {
    const bool plain = (c >= ' ' && c <= '~') || static_cast<unsigned char>(c) >= 0x80;
    shown += plain ? c : '?';
  }
  return text.size() > kMost ? shown + "..." : shown;
}

/// Does `text` begin with `word`, whatever the case?
[[nodiscard]] constexpr bool begins_with_word(std::string_view text, std::string_view word) {
  if (text.size() < word.size()) return false;
  for (std::size_t i = 0; i < word.size(); ++i) {
    if (to_lower(text[i]) != to_lower(word[i])) return false;
  }
  return true;
}

}  // namespace loadstair::dialect
