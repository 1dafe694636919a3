#include "daemon/command/text_table.h"

#include <algorithm>

namespace loadstair::command {
namespace {

/// Characters, not bytes: continuation bytes of UTF-8 do not count.
std::size_t width_of(const std::string& text) {
  return static_cast<std::size_t>(std::count_if(text.begin(), text.end(), [](char letter) {
    return (static_cast<unsigned char>(letter) & 0xC0U) != 0x80U;
  }));
}

std::string padded(const std::string& text, std::size_t width) {
  return text + std::string(width > width_of(text) ? width - width_of(text) : 0, ' ');
}

}  // namespace

std::string table_of(const std::vector<Row>& rows) {
  std::vector<std::size_t> widths(rows.front().size(), 0);
  for (const auto& row : rows) {
    for (std::size_t i = 0; i < row.size(); ++i) widths[i] = std::max(widths[i], width_of(row[i]));
  }
  std::string text;
  for (const auto& row : rows) {
    std::string line;
    for (std::size_t i = 0; i < row.size(); ++i) line += "  " + padded(row[i], widths[i]);
    line.erase(line.find_last_not_of(' ') + 1);
    text += line + "\n";
  }
  return text;
}

}  // namespace loadstair::command
