#include "drivers/scope_csv/csv_text.h"

#include <algorithm>
#include <cstdint>

#include "analysis/base/number.h"

namespace loadstair::scope_csv {
namespace {

constexpr std::size_t kQuotedCharacters = 40;

unsigned char byte_at(std::string_view text, std::size_t at) {
  return static_cast<unsigned char>(text[at]);
}

/// Bytes of the UTF-8 character at `at`, 0 where none is well formed (Unicode 15, table 3-7).
std::size_t utf8_length(std::string_view text, std::size_t at) {
  const unsigned char lead = byte_at(text, at);
  if (lead < 0x80) return 1;
  const std::size_t length = lead >= 0xC2 && lead < 0xE0   ? 2
                             : lead >= 0xE0 && lead < 0xF0 ? 3
                             : lead >= 0xF0 && lead < 0xF5 ? 4
                                                           : 0;
  if (length == 0 || at + length > text.size()) return 0;
  for (std::size_t k = 1; k < length; ++k) {
    if ((byte_at(text, at + k) & 0xC0U) != 0x80U) return 0;
  }
  const unsigned char second = byte_at(text, at + 1);
  const bool overlong = (lead == 0xE0 && second < 0xA0) || (lead == 0xF0 && second < 0x90);
  const bool beyond = (lead == 0xED && second >= 0xA0) || (lead == 0xF4 && second >= 0x90);
  return overlong || beyond ? 0 : length;
}

bool is_utf8(std::string_view text) {
  for (std::size_t at = 0; at < text.size();) {
    const std::size_t length = utf8_length(text, at);
    if (length == 0) return false;
    at += length;
  }
  return true;
}

std::string hex_escape(unsigned char byte) {
  constexpr std::string_view kDigits = "0123456789ABCDEF";
  return {'\\', 'x', kDigits[byte >> 4U], kDigits[byte & 0xFU]};
}

}  // namespace

std::string_view trimmed(std::string_view text) {
  constexpr std::string_view kBlank = " \t\r";
  const auto first = text.find_first_not_of(kBlank);
  if (first == std::string_view::npos) return text.substr(text.size());
  return text.substr(first, text.find_last_not_of(kBlank) - first + 1);
}

std::vector<Field> split_fields(std::string_view line, char separator) {
  std::vector<Field> fields;
  std::size_t begin = 0;
  for (;;) {
    std::size_t first = begin;
    while (first < line.size() && line[first] != separator && (line[first] == ' ' || line[first] == '\t'))
      ++first;
    Field field;
    std::size_t end = 0;
    if (first < line.size() && line[first] == '"') {
      std::size_t close = first + 1;
      while (close < line.size() &&
             (line[close] != '"' || (close + 1 < line.size() && line[close + 1] == '"'))) {
        close += line[close] == '"' ? 2 : 1;
      }
      close = std::min(close, line.size());
      end = std::min(line.find(separator, close), line.size());
      // What follows the closing quote belongs to the field, so that it is seen and refused.
      const bool only_quoted =
          close < line.size() && trimmed(line.substr(close + 1, end - close - 1)).empty();
      const auto inner =
          only_quoted ? line.substr(first + 1, close - first - 1) : line.substr(first, end - first);
      field.text = trimmed(inner);
      field.in_quotes = only_quoted;
    } else {
      end = std::min(line.find(separator, begin), line.size());
      field.text = trimmed(line.substr(begin, end - begin));
    }
    field.offset = static_cast<std::size_t>(field.text.data() - line.data());
    fields.push_back(field);
    if (end >= line.size()) return fields;
    begin = end + 1;
  }
}

std::size_t filled_fields(const std::vector<Field>& fields) {
  std::size_t filled = fields.size();
  while (filled > 0 && fields[filled - 1].text.empty()) --filled;
  return filled;
}

std::string clean_text(std::string_view foreign) {
  std::string clean;
  clean.reserve(foreign.size());
  const bool utf8 = is_utf8(foreign);
  for (const char c : foreign) {
    const auto byte = static_cast<unsigned char>(c);
    if (byte < 0x20 || byte == 0x7F) {
      clean += ' ';
    } else if (utf8 || byte < 0x80) {
      clean += c;
    } else {
      clean += static_cast<char>(0xC0U | (byte >> 6U));
      clean += static_cast<char>(0x80U | (byte & 0x3FU));
    }
  }
  return clean;
}

std::string field_name(const Field& field) {
  std::string name = clean_text(field.text);
  for (std::size_t at = name.find("\"\""); field.in_quotes && at != std::string::npos;
       at = name.find("\"\"", at + 1)) {
    name.erase(at, 1);
  }
  return std::string{trimmed(name)};
}

std::string shown(std::string_view foreign) {
  std::string text = "\"";
  std::size_t characters = 0;
  for (std::size_t at = 0; at < foreign.size(); ++characters) {
    if (characters == kQuotedCharacters) {
      text += "...";
      break;
    }
    const std::size_t length = utf8_length(foreign, at);
    if (length == 0 || byte_at(foreign, at) < 0x20 || byte_at(foreign, at) == 0x7F) {
      text += hex_escape(byte_at(foreign, at));
      ++at;
    } else {
      text += foreign.substr(at, length);
      at += length;
    }
  }
  return text + '"';
}

std::string lower(std::string_view text) {
  std::string low{text};
  for (char& c : low) {
    if (c >= 'A' && c <= 'Z') c = static_cast<char>(c - 'A' + 'a');
  }
  return low;
}

base::Refusal refusal_at(std::string_view file_name, std::size_t line, std::string_view text,
                         std::size_t offset, std::string reason) {
  std::size_t column = 1;
  for (std::size_t at = 0; at < std::min(offset, text.size()); ++column) {
    at += std::max<std::size_t>(utf8_length(text, at), 1);
  }
  return {clean_text(file_name) + ":" + text_of(line) + ":" + text_of(column), std::move(reason)};
}

std::string short_number(double value) {
  return base::print_number(base::parse_number(base::print_significant(value, 6)).value_or(value));
}

std::string text_of(std::size_t count) {
  return base::print_integer(static_cast<std::int64_t>(count));
}

std::string counted(std::size_t count, std::string_view noun) {
  return text_of(count) + " " + std::string{noun} + (count == 1 ? "" : "s");
}

}  // namespace loadstair::scope_csv
