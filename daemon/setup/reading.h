// What the readers of this room share. For its own .cpp files only.
#pragma once

#include <algorithm>
#include <string>
#include <string_view>
#include <vector>

#include "daemon/setup/forms.h"
#include "drivers/document/reader.h"

namespace loadstair::setup {

/// Reports a missing or unknown "format". `what` is the form's name.
void read_format(document::ObjectReader& top);

/// The whole file, or a refusal at FILE when it cannot be opened.
[[nodiscard]] base::Outcome<std::string> load_text(const std::string& file, std::string_view what);

template <class Named>
[[nodiscard]] std::vector<std::string_view> names_of(const std::vector<Named>& all) {
  std::vector<std::string_view> names;
  for (const auto& one : all) names.push_back(one.name);
  return names;
}

[[nodiscard]] inline bool contains(std::span<const std::string_view> names, std::string_view name) {
  return std::find(names.begin(), names.end(), name) != names.end();
}

/// Reports a name that is taken already.
void require_new(document::ObjectReader& reader, std::string_view key, std::string_view name,
                 std::span<const std::string_view> taken);

/// Reports a name that is not there: "there is no channel "x"; did you mean "y"?".
void require_known(document::ObjectReader& reader, std::string_view key, std::string_view what,
                   std::string_view name, std::span<const std::string_view> known);

/// A unit without prefix in our one spelling; reported otherwise. Empty after a report.
[[nodiscard]] std::string plain_unit(document::ObjectReader& reader, std::string_view key,
                                     const std::string& written);

/// Calls `read` with a reader of the object under the key, when it is there.
template <class Read>
void with_object(document::ObjectReader& parent, std::string_view key, const document::Form& form,
                 Read read) {
  const auto* value = parent.maybe(key, document::Type::object);
  if (value == nullptr) return;
  document::ObjectReader reader{*value, form, parent.problem()};
  if (!parent.problem().found()) read(reader);
}

/// Calls `each(reader, index)` for every object of the list under the key, until a problem is found.
template <class Each>
void for_objects(document::ObjectReader& top, std::string_view key, const document::Form& form, Each each) {
  const document::Value* list = top.maybe(key, document::Type::list);
  if (list == nullptr) return;
  for (std::size_t i = 0; i < list->items.size() && !top.problem().found(); ++i) {
    document::ObjectReader reader{list->items[i], form, top.problem()};
    if (!top.problem().found()) each(reader, i);
  }
}

}  // namespace loadstair::setup
