// What must hold for any bytes given to drivers/document. Shared by the fuzz target and the corpus replay.
#pragma once

#include <string>
#include <string_view>

#include "drivers/document/document.h"

namespace loadstair::fuzz {

inline bool same(const document::Value& a, const document::Value& b) {
  if (a.type != b.type || a.boolean != b.boolean || a.number != b.number) return false;
  if (a.type == document::Type::text && a.text != b.text) return false;
  if (a.items.size() != b.items.size() || a.members.size() != b.members.size()) return false;
  for (std::size_t i = 0; i < a.items.size(); ++i) {
    if (!same(a.items[i], b.items[i])) return false;
  }
  for (std::size_t i = 0; i < a.members.size(); ++i) {
    if (a.members[i].name != b.members[i].name || !same(a.members[i].value, b.members[i].value)) return false;
  }
  return true;
}

/// Empty when all is well, else what broke: a refusal has a place and a reason; a document prints to a text
/// that reads back to the same values and prints the same again; a value replaced by itself leaves every
/// byte.
inline std::string check_document(std::string_view bytes) {
  const auto read = document::parse(bytes, "input");
  if (!read) {
    const bool placed = read.refusal().place.starts_with("input:") && !read.refusal().reason.empty();
    return placed ? "" : "a refusal without place or reason: " + read.refusal().text();
  }
  const std::string printed = document::print(*read);
  const auto again = document::parse(printed, "printed");
  if (!again) return "the printed document is refused: " + again.refusal().text();
  if (!same(*read, *again)) return "the printed document reads as something else";
  if (document::print(*again) != printed) return "printing is not stable";
  const auto own = bytes.substr(read->begin, read->end - read->begin);
  const auto replaced = document::replace_value(bytes, "", own);
  if (!replaced || *replaced != bytes) return "a value replaced by itself changed the text";
  return "";
}

}  // namespace loadstair::fuzz
