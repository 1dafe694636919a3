#include <algorithm>
#include <optional>

#include "analysis/base/number.h"
#include "drivers/document/document.h"

namespace loadstair::document {
namespace {

// "~1" is '/', "~0" is '~' (RFC 6901, section 4).
std::string unescape(std::string_view part) {
  std::string out;
  for (std::size_t i = 0; i < part.size(); ++i) {
    const bool escape = part[i] == '~' && i + 1 < part.size() && (part[i + 1] == '0' || part[i + 1] == '1');
    out += escape ? (part[++i] == '1' ? '/' : '~') : part[i];
  }
  return out;
}

bool is_called(const Value& item, std::string_view name) {
  for (const auto key : {"name", "channel", "label"}) {
    const Member* member = item.find(key);
    if (member != nullptr && member->value.type == Type::text) return member->value.text == name;
  }
  return false;
}

const Value* step_into(const Value& value, const std::string& part) {
  if (value.type == Type::object) {
    const Member* member = value.find(part);
    return member == nullptr ? nullptr : &member->value;
  }
  if (value.type != Type::list) return nullptr;
  if (!part.empty() && std::all_of(part.begin(), part.end(), [](char c) { return c >= '0' && c <= '9'; })) {
    const auto index = base::parse_integer(part);
    if (!index || static_cast<std::size_t>(*index) >= value.items.size()) return nullptr;
    return &value.items[static_cast<std::size_t>(*index)];
  }
  const auto at = std::find_if(value.items.begin(), value.items.end(),
                               [&](const Value& item) { return is_called(item, part); });
  return at == value.items.end() ? nullptr : &*at;
}

}  // namespace

const Value* find(const Value& document, std::string_view path) {
  const Value* value = &document;
  if (path.starts_with('/')) path.remove_prefix(1);
  while (!path.empty() && value != nullptr) {
    const std::size_t slash = path.find('/');
    value = step_into(*value, unescape(path.substr(0, slash)));
    path = slash == std::string_view::npos ? std::string_view{} : path.substr(slash + 1);
  }
  return value;
}

base::Outcome<std::string> replace_value(std::string_view text, std::string_view path,
                                         std::string_view new_json) {
  const auto document = parse(text, "the document");
  if (!document) return document.refusal();
  const auto fresh = parse(new_json, "the new value");
  if (!fresh) return fresh.refusal();
  const Value* old = find(*document, path);
  if (old == nullptr) {
    return base::Refusal{std::string{path},
                         "nothing stands at this path; only what is there can be replaced"};
  }
  // Of the new value only its own bytes, so that a comment around it cannot swallow what follows in the line.
  const std::string inner{new_json.substr(fresh->begin, fresh->end - fresh->begin)};
  std::string edited = std::string{text.substr(0, old->begin)} + inner + std::string{text.substr(old->end)};
  const auto again = parse(edited, "the edited document");
  if (!again) return again.refusal();
  return edited;
}

}  // namespace loadstair::document
