// document: JSON with `//` comments, as people write it, into values that know their line and column; edits
// that keep every other byte. Not for what the keys mean (daemon/setup), nor for JSON that programs write.
#pragma once

#include <cstddef>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"

namespace loadstair::document {

/// Where something stands in a text: line and column from 1. A column is one character (UTF-8 code point), as
/// editors count; a tab is one.
struct Place {
  int line = 1;
  int column = 1;
  bool operator==(const Place&) const = default;
};

/// "bench.json:12:7", the form that editors jump to.
[[nodiscard]] std::string print_place(const std::string& file, Place place);

enum class Type { null, boolean, number, text, list, object };

/// "a number", "a text in quotes", "a list", ... for messages.
[[nodiscard]] std::string_view name_of(Type type);

struct Member;

/// One value with what is inside it. Which fields count is decided by `type`.
struct Value {
  Type type = Type::null;
  bool boolean = false;
  double number = 0.0;
  std::string text;             ///< text: decoded; number: as it was written ("10e6")
  std::vector<Value> items;     ///< list
  std::vector<Member> members;  ///< object, in the order written, names unique
  Place place;                  ///< of its first character
  std::size_t begin = 0;        ///< bytes [begin, end) of the text it was read from
  std::size_t end = 0;

  /// The member of that name; nullptr when there is none or this is no object.
  [[nodiscard]] const Member* find(std::string_view name) const;
};

struct Member {
  std::string name;
  Place place;  ///< of the key's opening quote
  Value value;
};

/// Deepest nesting of lists and objects that is read.
inline constexpr int kDeepest = 64;

/// Reads one document.
/// text   UTF-8, with or without a byte order mark; JSON (RFC 8259) plus comments from `//` to the end of the
/// line. file   used in messages only. Refusal: "FILE:line:column" of the first offence, with what would be
/// right. Beyond the grammar of JSON these are refused too: keys that stand twice in one object, trailing
/// commas, invalid UTF-8, lone surrogates, U+0000, numbers beyond a double's range, nesting deeper than
/// kDeepest.
[[nodiscard]] base::Outcome<Value> parse(std::string_view text, const std::string& file);

/// The document as text: two blanks of indentation, one member or item a line, shortest numbers, no comments.
/// Reading it again gives the same values, and printing those the same text.
[[nodiscard]] std::string print(const Value& value);

/// `text` in quotes with what must be escaped escaped.
[[nodiscard]] std::string print_text(std::string_view text);

/// Finds a value by its path: names and list positions (from 0) joined by '/', such as "channels/2/unit". An
/// item of a list may also be named by its member "name", "channel" or "label": "channels/input
/// current/unit". In a name
/// "~1" stands for '/' and "~0" for '~' (RFC 6901). The empty path is the document.
/// Returns nullptr when nothing stands there.
[[nodiscard]] const Value* find(const Value& document, std::string_view path);

/// Replaces the value at `path` and keeps every other byte, comments included.
/// new_json  the new value, itself JSON.
/// Refusal: the text or the new value cannot be read, nothing stands at the path, or the result cannot be
/// read.
[[nodiscard]] base::Outcome<std::string> replace_value(std::string_view text, std::string_view path,
                                                       std::string_view new_json);

}  // namespace loadstair::document
