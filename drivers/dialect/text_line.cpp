#include "drivers/dialect/text_line.h"

#include <algorithm>

#include "analysis/base/number.h"
#include "analysis/base/unit.h"
#include "drivers/dialect/number_token.h"
#include "drivers/dialect/text.h"

namespace loadstair::dialect {
namespace {

base::Refusal refused_at(std::size_t at, std::string reason) {
  return {"column " + base::print_integer(static_cast<std::int64_t>(at) + 1), std::move(reason)};
}

/// Bytes of a unit: letters, percent, and everything beyond ASCII (degree, micro, ohm).
bool is_unit_byte(char c) {
  const char lower = to_lower(c);
  return (lower >= 'a' && lower <= 'z') || c == '%' || static_cast<unsigned char>(c) >= 0x80;
}

bool is_prefix(std::string_view text) {
  // One that makes a unit of a unit.
  return base::parse_unit(std::string{text} + "V").has_value() && !base::parse_unit(text).has_value();
}

}  // namespace

std::optional<LinePattern::Kind> LinePattern::kind_of(std::string_view place) {
  if (place == "value") return Kind::value;
  if (place == "prefix") return Kind::prefix;
  if (place == "unit") return Kind::unit;
  if (place == "text") return Kind::text;
  if (place == "rest") return Kind::rest;
  return std::nullopt;
}

base::Outcome<LinePattern> LinePattern::parse(std::string_view pattern) {
  LinePattern made;
  auto& parts = made.parts_;
  const auto add_literal = [&parts](char c) {
    if (parts.empty() || parts.back().kind != Kind::literal) parts.push_back({Kind::literal, {}});
    parts.back().literal += c;
  };
  for (std::size_t at = 0; at < pattern.size();) {
    const char c = pattern[at];
    if (is_blank(c)) {
      const bool after_literal = !parts.empty() && parts.back().kind == Kind::literal;
      while (at < pattern.size() && is_blank(pattern[at])) ++at;
      const bool before_literal =
          at < pattern.size() && (pattern[at] != '{' || pattern.substr(at).starts_with("{{"));
      parts.push_back({after_literal && before_literal ? Kind::some_blanks : Kind::blanks, {}});
    } else if (pattern.substr(at).starts_with("{{")) {
      add_literal('{');
      at += 2;
    } else if (c == '{') {
      const auto end = pattern.find('}', at);
      if (end == std::string_view::npos) return refused_at(at, "this brace does not end");
      const auto place = pattern.substr(at + 1, end - at - 1);
      const auto kind = kind_of(place);
      if (!kind) {
        return refused_at(
            at, "{" + std::string{place} +
                    "} is not a place of a pattern; there are {value}, {unit}, {prefix}, {text} and "
                    "{rest}, and {{ for a brace itself");
      }
      parts.push_back({*kind, {}});
      at = end + 1;
    } else {
      add_literal(c);
      ++at;
    }
  }
  if (auto sound = made.check(); !sound) return sound.refusal();
  return made;
}

base::Outcome<void> LinePattern::check() const {
  const auto count = [this](Kind kind) {
    return std::count_if(parts_.begin(), parts_.end(),
                         [kind](const Part& part) { return part.kind == kind; });
  };
  const auto place = [this](Kind kind) {
    return std::find_if(parts_.begin(), parts_.end(), [kind](const Part& part) { return part.kind == kind; });
  };
  if (count(Kind::value) != 1) return base::Refusal{{}, "a pattern needs {value} exactly once"};
  if (count(Kind::unit) > 1 || count(Kind::prefix) > 1)
    return base::Refusal{{}, "{unit} and {prefix} may stand once"};
  if (count(Kind::prefix) == 1 && place(Kind::unit) < place(Kind::prefix)) {
    return base::Refusal{{}, "{prefix} must stand before {unit}"};
  }
  if (count(Kind::prefix) == 1 && count(Kind::unit) == 0) {
    return base::Refusal{{}, "{prefix} needs {unit} after it"};
  }
  if (count(Kind::rest) > 1 || (count(Kind::rest) == 1 && parts_.back().kind != Kind::rest)) {
    return base::Refusal{{}, "{rest} may stand at the end only"};
  }
  return {};
}

/// Walks a line along a pattern.
struct LinePattern::Scan {
  std::string_view rest;
  const NumberRules& rules;
  std::optional<NumberToken> token = std::nullopt;
  std::string prefix = {};
  std::string unit = {};

  std::size_t skip_blanks() {
    std::size_t count = 0;
    while (count < rest.size() && is_blank(rest[count])) ++count;
    rest.remove_prefix(count);
    return count;
  }

  [[nodiscard]] std::string take_unit_run() {
    std::size_t length = 0;
    while (length < rest.size() && is_unit_byte(rest[length])) ++length;
    std::string run{rest.substr(0, length)};
    rest.remove_prefix(length);
    return run;
  }

  [[nodiscard]] bool may_lack_unit() const { return token && token->quality == Quality::overload; }

  [[nodiscard]] bool take_value() {
    token = find_number(rest, rules);
    if (token) rest.remove_prefix(token->length);
    return token.has_value();
  }

  /// A prefix may be missing, and "mV" in one run holds both.
  void take_prefix() {
    const auto before = rest;
    prefix = take_unit_run();
    if (is_prefix(prefix)) return;
    prefix.clear();
    rest = before;
  }

  [[nodiscard]] bool take_unit() {
    unit = take_unit_run();
    return !unit.empty() || may_lack_unit();
  }

  [[nodiscard]] bool take_text() {
    std::size_t length = 0;
    while (length < rest.size() && !is_blank(rest[length])) ++length;
    rest.remove_prefix(length);
    return length > 0;
  }

  [[nodiscard]] bool step(const Part& part) {
    switch (part.kind) {
      case Kind::literal:
        if (!rest.starts_with(part.literal)) return false;
        rest.remove_prefix(part.literal.size());
        return true;
      case Kind::blanks:
        skip_blanks();
        return true;
      case Kind::some_blanks:
        return skip_blanks() > 0;
      case Kind::value:
        return take_value();
      case Kind::prefix:
        take_prefix();
        return true;
      case Kind::unit:
        return take_unit();
      case Kind::text:
        return take_text();
      case Kind::rest:
        rest = {};
        return true;
    }
    return false;
  }
};

std::optional<Field> LinePattern::read(std::string_view line, std::string_view expected_unit,
                                       const NumberRules& rules) const {
  Scan scan{trim(line), rules};
  for (const auto& part : parts_) {
    if (!scan.step(part)) return std::nullopt;
  }
  scan.skip_blanks();
  if (!scan.rest.empty() || !scan.token) return std::nullopt;
  return make_field(*scan.token, scan.prefix + scan.unit, expected_unit);
}

}  // namespace loadstair::dialect
