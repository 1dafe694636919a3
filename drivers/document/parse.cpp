#include <map>
#include <optional>
#include <utility>

#include "analysis/base/number.h"
#include "drivers/document/document.h"
#include "drivers/document/utf8.h"

namespace loadstair::document {
namespace {

bool is_digit(char c) {
  return c >= '0' && c <= '9';
}
bool is_word(char c) {
  return (c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z') || c == '_';
}

std::optional<std::uint32_t> hex_digit(char c) {
  if (is_digit(c)) return static_cast<std::uint32_t>(c - '0');
  if (c >= 'a' && c <= 'f') return static_cast<std::uint32_t>(c - 'a' + 10);
  if (c >= 'A' && c <= 'F') return static_cast<std::uint32_t>(c - 'A' + 10);
  return std::nullopt;
}

// What may follow a backslash beside 'u', and what it stands for (RFC 8259, section 7).
constexpr std::pair<char, char> kEscapes[] = {{'"', '"'},  {'\\', '\\'}, {'/', '/'},  {'b', '\b'},
                                              {'f', '\f'}, {'n', '\n'},  {'r', '\r'}, {'t', '\t'}};

// The first offence ends the reading: every function returns false (or nothing) once a refusal is kept.
class Parser {
 public:
  Parser(std::string_view text, const std::string& file) : text_{text}, file_{file} {}

  base::Outcome<Value> document() {
    if (text_.starts_with("\xEF\xBB\xBF")) at_ = counted_to_ = 3;
    Value value;
    if (!check_encoding() || !skip_blanks()) return *refusal_;
    if (at_ == text_.size()) return refuse("the file holds nothing; write an object: { ... }");
    if (!read_value(value, 0) || !skip_blanks()) return *refusal_;
    if (at_ < text_.size()) {
      return refuse("there is more after the end of the document: " + seen() +
                    "; remove it, or remove the bracket that closes too early");
    }
    return value;
  }

 private:
  [[nodiscard]] bool more() const { return at_ < text_.size(); }
  [[nodiscard]] char now() const { return more() ? text_[at_] : '\0'; }

  // Counts on from the last place asked for, so that a long line costs one pass.
  [[nodiscard]] Place here() {
    for (; counted_to_ < at_; ++counted_to_) {
      if ((static_cast<unsigned char>(text_[counted_to_]) & 0xC0U) != 0x80U) ++column_;
    }
    return {line_, column_};
  }

  base::Refusal refuse_at(Place place, std::string reason) {
    if (!refusal_) refusal_ = base::Refusal{print_place(file_, place), std::move(reason)};
    return *refusal_;
  }
  base::Refusal refuse(std::string reason) { return refuse_at(here(), std::move(reason)); }
  bool fail(std::string reason) {
    refuse(std::move(reason));
    return false;
  }

  // What stands here, for a message.
  [[nodiscard]] std::string seen() const {
    if (!more()) return "the end of the file";
    if (now() == '\n' || now() == '\r') return "the end of the line";
    if (is_word(now())) {
      std::size_t end = at_;
      while (end < text_.size() && end < at_ + 20 && (is_word(text_[end]) || is_digit(text_[end]))) ++end;
      return std::string{text_.substr(at_, end - at_)};
    }
    if (now() == '"') {
      const std::size_t end = text_.find_first_of("\"\r\n", at_ + 1);
      const bool closed = end != std::string_view::npos && text_[end] == '"' && end - at_ < 40;
      return closed ? std::string{text_.substr(at_, end + 1 - at_)} : "a text in quotes";
    }
    const auto byte = static_cast<unsigned char>(now());
    if (byte < 0x20 || byte == 0x7F) return "a control character (code " + base::print_integer(byte) + ")";
    return "'" + std::string{text_.substr(at_, character_size(text_, at_))} + "'";
  }

  // Tried once over the whole text, so that the rest may trust it.
  bool check_encoding() {
    Place place;
    for (std::size_t i = at_; i < text_.size();) {
      const std::size_t size = character_size(text_, i);
      if (size == 0) {
        refuse_at(place, "a byte here is not UTF-8; save the file as UTF-8");
        return false;
      }
      if (text_[i] == '\n') {
        ++place.line;
        place.column = 0;
      }
      ++place.column;
      i += size;
    }
    return true;
  }

  void next_line() {
    ++at_;
    ++line_;
    counted_to_ = at_;
    column_ = 1;
  }

  bool skip_blanks() {
    while (more()) {
      if (now() == '\n') {
        next_line();
      } else if (now() == ' ' || now() == '\t' || now() == '\r') {
        ++at_;
      } else if (text_.substr(at_, 2) == "//") {
        while (more() && now() != '\n') ++at_;
      } else if (text_.substr(at_, 2) == "/*" || now() == '#') {
        return fail("comments begin with // and end with the line");
      } else {
        return true;
      }
    }
    return true;
  }

  bool read_value(Value& value, int depth) {
    value.place = here();
    value.begin = at_;
    const bool good = read_inside(value, depth);
    value.end = at_;
    return good;
  }

  bool read_inside(Value& value, int depth) {
    if (now() == '{' || now() == '[') {
      if (depth >= kDeepest) {
        return fail("lists and objects are nested deeper than " + base::print_integer(kDeepest) + " levels");
      }
      return now() == '{' ? read_object(value, depth) : read_list(value, depth);
    }
    if (now() == '"') {
      value.type = Type::text;
      return read_text(value.text);
    }
    if (is_digit(now()) || now() == '-' || now() == '+' || now() == '.') return read_number(value);
    if (is_word(now())) return read_word(value);
    if (now() == '\'') return fail("texts stand in double quotes: \"...\"");
    if (now() == ',') return fail("a value is missing before this comma");
    return fail("a value was expected here, not " + seen());
  }

  bool read_word(Value& value) {
    const std::string word = seen();
    if (word == "true" || word == "false") {
      value.type = Type::boolean;
      value.boolean = word == "true";
    } else if (word == "NaN" || word == "nan" || word == "Infinity" || word == "inf") {
      return fail(word + " is not a number; leave the key out where nothing is known");
    } else if (word != "null") {
      return fail(word + " is no value; texts stand in double quotes: \"" + word + "\"");
    }
    at_ += word.size();
    return true;
  }

  bool read_number(Value& value) {
    const std::size_t begin = at_;
    if (now() == '+') return fail("numbers have no leading +; leave it out");
    if (now() == '-') ++at_;
    if (now() == '.') return fail("a digit is missing before the decimal point; write 0.5, not .5");
    if (!is_digit(now())) return fail("a digit was expected after the minus, not " + seen());
    if (now() == '0' && at_ + 1 < text_.size() && is_digit(text_[at_ + 1])) {
      return fail("numbers have no leading zeros; remove the 0");
    }
    while (is_digit(now())) ++at_;
    if (now() == '.') {
      ++at_;
      if (!is_digit(now())) return fail("a digit is missing after the decimal point; write 5.0, not 5.");
      while (is_digit(now())) ++at_;
    }
    if (now() == 'e' || now() == 'E') {
      ++at_;
      if (now() == '+' || now() == '-') ++at_;
      if (!is_digit(now())) return fail("the exponent has no digits; write 1e6");
      while (is_digit(now())) ++at_;
    }
    if (is_word(now())) {
      return fail("a number ends where " + seen() + " begins; units belong to the key, not to the number");
    }
    value.type = Type::number;
    value.text = std::string{text_.substr(begin, at_ - begin)};
    const auto number = base::parse_number(value.text);
    if (!number.has_value()) {
      refuse_at(value.place, "the number " + value.text.substr(0, 40) + " is too large to be held");
      return false;
    }
    value.number = *number;
    return true;
  }

  bool read_text(std::string& into) {
    const Place begin = here();
    ++at_;
    while (more()) {
      const char c = now();
      if (c == '"') {
        ++at_;
        return true;
      }
      if (c == '\n' || c == '\r') break;
      if (static_cast<unsigned char>(c) < 0x20) {
        return fail("a text holds " + seen() + (c == '\t' ? "; write \\t" : "; remove it"));
      }
      if (c == '\\') {
        if (!read_escape(into)) return false;
      } else {
        into += c;
        ++at_;
      }
    }
    refuse_at(begin, "this text does not end in its line; close it with \"");
    return false;
  }

  bool read_escape(std::string& into) {
    const char kind = at_ + 1 < text_.size() ? text_[at_ + 1] : '\0';
    if (kind == 'u') return read_coded(into);
    for (const auto& [written, meant] : kEscapes) {
      if (written != kind) continue;
      into += meant;
      at_ += 2;
      return true;
    }
    return fail("a backslash begins no known escape here; write \\\\ for a backslash itself");
  }

  // "\u00b0", and a pair "\ud83d\ude00" for what lies beyond U+FFFF.
  bool read_coded(std::string& into) {
    constexpr const char* kLone = "half of a surrogate pair stands alone; write the character itself";
    const auto first = four_digits(at_ + 2);
    if (!first) return fail("\\u wants four hexadecimal digits, such as \\u00b0");
    if (*first == 0) return fail("the character U+0000 is not allowed in a text");
    if (*first < 0xD800 || *first > 0xDFFF) {
      append_character(into, *first);
      at_ += 6;
      return true;
    }
    const auto second = text_.substr(at_ + 6, 2) == "\\u" ? four_digits(at_ + 8) : std::nullopt;
    if (*first > 0xDBFF || !second || *second < 0xDC00 || *second > 0xDFFF) return fail(kLone);
    append_character(into, 0x10000 + ((*first - 0xD800) << 10) + (*second - 0xDC00));
    at_ += 12;
    return true;
  }

  [[nodiscard]] std::optional<std::uint32_t> four_digits(std::size_t from) const {
    if (from + 4 > text_.size()) return std::nullopt;
    std::uint32_t code = 0;
    for (std::size_t i = from; i < from + 4; ++i) {
      const auto digit = hex_digit(text_[i]);
      if (!digit) return std::nullopt;
      code = code * 16 + *digit;
    }
    return code;
  }

  // After a value: true when another one follows, false at the end or at an offence (then a refusal is kept).
  bool another(char closing, Place opened) {
    if (!skip_blanks()) return false;
    if (now() == closing) {
      ++at_;
      return false;
    }
    if (now() != ',') {
      const std::string what = closing == '}' ? "object" : "list";
      if (!more()) {
        refuse_at(opened, "the " + what + " that begins here is never closed; add " + closing);
      } else {
        const bool unit = after_number_ && is_word(now());
        refuse_at(after_last_, "a comma or " + std::string{closing} + " is missing here, before " + seen() +
                                   (unit ? "; a number stands alone, its unit belongs to the key" : ""));
      }
      return false;
    }
    const Place comma = here();
    ++at_;
    if (!skip_blanks()) return false;
    if (now() == '}' || now() == ']') {
      refuse_at(comma, "a comma stands before the closing " + std::string{now()} + "; remove the comma");
      return false;
    }
    return true;
  }

  bool read_list(Value& value, int depth) {
    value.type = Type::list;
    const Place opened = here();
    ++at_;
    if (!skip_blanks()) return false;
    if (now() == ']') {
      ++at_;
      return true;
    }
    do {
      if (!more()) return close_missing(opened, ']');
      value.items.emplace_back();
      if (!read_value(value.items.back(), depth + 1)) return false;
      after_last_ = here();
      after_number_ = value.items.back().type == Type::number;
    } while (another(']', opened));
    return !refusal_;
  }

  bool read_object(Value& value, int depth) {
    value.type = Type::object;
    const Place opened = here();
    std::map<std::string, Place, std::less<>> seen_keys;
    ++at_;
    if (!skip_blanks()) return false;
    if (now() == '}') {
      ++at_;
      return true;
    }
    do {
      if (!more()) return close_missing(opened, '}');
      value.members.emplace_back();
      if (!read_member(value.members.back(), depth, seen_keys)) return false;
      after_last_ = here();
      after_number_ = value.members.back().value.type == Type::number;
    } while (another('}', opened));
    return !refusal_;
  }

  bool close_missing(Place opened, char closing) {
    const std::string what = closing == '}' ? "object" : "list";
    refuse_at(opened, "the " + what + " that begins here is never closed; add " + closing);
    return false;
  }

  bool read_member(Member& member, int depth, std::map<std::string, Place, std::less<>>& seen_keys) {
    member.place = here();
    if (now() != '"') {
      if (now() == ',') return fail("a key is missing before this comma");
      if (is_word(now()))
        return fail("the key " + seen() + " must stand in double quotes: \"" + seen() + "\"");
      return fail("a key in double quotes was expected here, not " + seen());
    }
    if (!read_text(member.name)) return false;
    const auto [first, is_new] = seen_keys.emplace(member.name, member.place);
    if (!is_new) {
      refuse_at(member.place, "the key " + print_text(member.name) +
                                  " stands twice in one object, first in line " +
                                  base::print_integer(first->second.line) + "; remove one of them");
      return false;
    }
    const Place after_key = here();
    if (!skip_blanks()) return false;
    if (now() != ':') {
      refuse_at(after_key, "a colon is missing after the key " + print_text(member.name));
      return false;
    }
    ++at_;
    if (!skip_blanks()) return false;
    if (!more() || now() == '}' || now() == ']' || now() == ',') {
      return fail("the key " + print_text(member.name) + " has no value; write one after the colon");
    }
    return read_value(member.value, depth + 1);
  }

  std::string_view text_;
  const std::string& file_;
  std::size_t at_ = 0;
  std::size_t counted_to_ = 0;  // column_ belongs to this byte
  int line_ = 1;
  int column_ = 1;
  Place after_last_;
  bool after_number_ = false;
  std::optional<base::Refusal> refusal_;
};

}  // namespace

base::Outcome<Value> parse(std::string_view text, const std::string& file) {
  return Parser{text, file}.document();
}

}  // namespace loadstair::document
