#include "drivers/dialect/scpi.h"

#include <algorithm>
#include <cmath>

#include "analysis/base/number.h"
#include "drivers/dialect/text.h"

namespace loadstair::dialect {

std::vector<std::string_view> split_reply(std::string_view reply) {
  reply = trim(reply);
  std::vector<std::string_view> elements;
  if (reply.empty()) return elements;
  std::size_t begin = 0;
  char quote = '\0';
  for (std::size_t at = 0; at < reply.size(); ++at) {
    const char c = reply[at];
    if (quote != '\0') {
      if (c == quote) quote = '\0';  // a doubled quote closes and opens again
    } else if (c == '"' || c == '\'') {
      quote = c;
    } else if (c == ',' || c == ';') {
      elements.push_back(trim(reply.substr(begin, at - begin)));
      begin = at + 1;
    }
  }
  elements.push_back(trim(reply.substr(begin)));
  return elements;
}

std::vector<Field> read_reply(std::string_view reply, std::span<const std::string> units,
                              const NumberRules& rules) {
  const auto elements = split_reply(reply);
  std::vector<Field> fields;
  fields.reserve(units.size());
  if (elements.size() != units.size()) {
    const auto why = base::print_integer(static_cast<std::int64_t>(elements.size())) + " values instead of " +
                     base::print_integer(static_cast<std::int64_t>(units.size()));
    fields.assign(units.size(), Field{Quality::invalid, 0.0, {}, why});
    return fields;
  }
  for (std::size_t i = 0; i < units.size(); ++i) fields.push_back(read_field(elements[i], units[i], rules));
  return fields;
}

base::Outcome<std::string> read_string(std::string_view element) {
  element = trim(element);
  const char quote = element.empty() ? '\0' : element.front();
  if (quote != '"' && quote != '\'') return base::Refusal{{}, "a string must begin with a quote"};
  std::string text;
  for (std::size_t at = 1; at < element.size(); ++at) {
    if (element[at] != quote) {
      text += element[at];
      continue;
    }
    const bool doubled = at + 1 < element.size() && element[at + 1] == quote;
    if (!doubled) {
      if (at + 1 == element.size()) return text;
      return base::Refusal{{}, "something follows the string's closing quote"};
    }
    text += quote;
    ++at;
  }
  return base::Refusal{{}, "the string does not end"};
}

base::Outcome<Identity> read_identity(std::string_view reply) {
  if (!std::all_of(reply.begin(), reply.end(), [](char c) { return c >= ' ' && c <= '~'; })) {
    return base::Refusal{{}, "an identity holds printable ASCII only"};
  }
  std::vector<std::string> parts;
  for (std::size_t begin = 0; begin <= reply.size();) {
    const auto end = std::min(reply.find(',', begin), reply.size());
    parts.emplace_back(trim(reply.substr(begin, end - begin)));
    begin = end + 1;
  }
  if (parts.size() != 4) {
    return base::Refusal{{},
                         base::print_integer(static_cast<std::int64_t>(parts.size())) +
                             " fields instead of manufacturer, model, serial number and firmware"};
  }
  const auto known = [](const std::string& part) { return part == "0" ? std::string{} : part; };
  return Identity{parts[0], parts[1], known(parts[2]), known(parts[3])};
}

std::string write_number(double value) {
  for (int decimals = 0; decimals <= 9 && std::abs(value) < 1e15; ++decimals) {
    auto plain = base::print_fixed(value, decimals);
    if (base::parse_number(plain) == value) return plain;
  }
  return base::print_number(value);
}

base::Outcome<std::string> write_command(std::string_view command, double value) {
  if (!std::isfinite(value)) return base::Refusal{std::string{command}, "the number to send is not finite"};
  const auto number = write_number(value);
  constexpr std::string_view kPlace = "{value}";
  std::string text{command};
  for (auto at = text.find(kPlace); at != std::string::npos; at = text.find(kPlace, at + number.size())) {
    text.replace(at, kPlace.size(), number);
  }
  return text;
}

}  // namespace loadstair::dialect
