#include "drivers/document/utf8.h"

namespace loadstair::document {
namespace {

struct Sequence {
  unsigned char first_low, first_high;
  unsigned char second_low, second_high;
  std::size_t size;
};

// The Unicode Standard 15.0, table 3-7, "Well-Formed UTF-8 Byte Sequences", rows of more than one byte.
constexpr Sequence kSequences[] = {
    {0xC2, 0xDF, 0x80, 0xBF, 2}, {0xE0, 0xE0, 0xA0, 0xBF, 3}, {0xE1, 0xEC, 0x80, 0xBF, 3},
    {0xED, 0xED, 0x80, 0x9F, 3}, {0xEE, 0xEF, 0x80, 0xBF, 3}, {0xF0, 0xF0, 0x90, 0xBF, 4},
    {0xF1, 0xF3, 0x80, 0xBF, 4}, {0xF4, 0xF4, 0x80, 0x8F, 4},
};

char byte(std::uint32_t value) {
  return static_cast<char>(static_cast<unsigned char>(value));
}

}  // namespace

std::size_t character_size(std::string_view text, std::size_t at) {
  const auto at_byte = [&](std::size_t i) { return static_cast<unsigned char>(text[i]); };
  const unsigned char first = at_byte(at);
  if (first < 0x80) return 1;
  for (const Sequence& row : kSequences) {
    if (first < row.first_low || first > row.first_high) continue;
    if (at + row.size > text.size()) return 0;
    if (at_byte(at + 1) < row.second_low || at_byte(at + 1) > row.second_high) return 0;
    for (std::size_t i = at + 2; i < at + row.size; ++i) {
      if (at_byte(i) < 0x80 || at_byte(i) > 0xBF) return 0;
    }
    return row.size;
  }
  return 0;
}

void append_character(std::string& text, std::uint32_t code) {
  if (code < 0x80) {
    text += byte(code);
  } else if (code < 0x800) {
    text += byte(0xC0 | (code >> 6));
    text += byte(0x80 | (code & 0x3F));
  } else if (code < 0x10000) {
    text += byte(0xE0 | (code >> 12));
    text += byte(0x80 | ((code >> 6) & 0x3F));
    text += byte(0x80 | (code & 0x3F));
  } else {
    text += byte(0xF0 | (code >> 18));
    text += byte(0x80 | ((code >> 12) & 0x3F));
    text += byte(0x80 | ((code >> 6) & 0x3F));
    text += byte(0x80 | (code & 0x3F));
  }
}

}  // namespace loadstair::document
