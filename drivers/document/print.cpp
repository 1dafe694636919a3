#include <algorithm>

#include "analysis/base/number.h"
#include "drivers/document/document.h"

namespace loadstair::document {
namespace {

constexpr char kHex[] = "0123456789abcdef";

void print_into(std::string& out, const Value& value, std::size_t depth) {
  const auto indent = [&](std::size_t levels) { out.append("\n").append(2 * levels, ' '); };
  switch (value.type) {
    case Type::null:
      out += "null";
      return;
    case Type::boolean:
      out += value.boolean ? "true" : "false";
      return;
    case Type::number:
      out += base::print_number(value.number);
      return;
    case Type::text:
      out += print_text(value.text);
      return;
    case Type::list:
      out += '[';
      for (const Value& item : value.items) {
        if (&item != &value.items.front()) out += ',';
        indent(depth + 1);
        print_into(out, item, depth + 1);
      }
      if (!value.items.empty()) indent(depth);
      out += ']';
      return;
    case Type::object:
      out += '{';
      for (const Member& member : value.members) {
        if (&member != &value.members.front()) out += ',';
        indent(depth + 1);
        out += print_text(member.name) + ": ";
        print_into(out, member.value, depth + 1);
      }
      if (!value.members.empty()) indent(depth);
      out += '}';
      return;
  }
}

}  // namespace

std::string print_place(const std::string& file, Place place) {
  return file + ":" + base::print_integer(place.line) + ":" + base::print_integer(place.column);
}

std::string_view name_of(Type type) {
  switch (type) {
    case Type::null:
      return "null";
    case Type::boolean:
      return "true or false";
    case Type::number:
      return "a number";
    case Type::text:
      return "a text in quotes";
    case Type::list:
      return "a list [...]";
    case Type::object:
      return "an object {...}";
  }
  return "nothing";
}

const Member* Value::find(std::string_view name) const {
  if (type != Type::object) return nullptr;
  const auto at =
      std::find_if(members.begin(), members.end(), [&](const Member& m) { return m.name == name; });
  return at == members.end() ? nullptr : &*at;
}

std::string print_text(std::string_view text) {
  std::string out = "\"";
  for (const char c : text) {
    const auto byte = static_cast<unsigned char>(c);
    if (c == '"' || c == '\\') {
      out += '\\';
      out += c;
    } else if (c == '\n') {
      out += "\\n";
    } else if (c == '\t') {
      out += "\\t";
    } else if (c == '\r') {
      out += "\\r";
    } else if (byte < 0x20) {
      out += "\\u00";
      out += kHex[byte >> 4];
      out += kHex[byte & 0xF];
    } else {
      out += c;
    }
  }
  return out + '"';
}

std::string print(const Value& value) {
  std::string out;
  print_into(out, value, 0);
  return out + '\n';
}

}  // namespace loadstair::document
