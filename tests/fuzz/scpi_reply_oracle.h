// What must hold for any bytes that come as a SCPI reply. Used by the fuzz target and by the replay of its
// corpus.
#pragma once

#include <cmath>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/number.h"
#include "analysis/base/unit.h"
#include "drivers/dialect/scpi.h"

namespace loadstair::fuzz {

/// Returns: what does not hold, or an empty string.
inline std::string broken_by_scpi_reply(std::string_view reply) {
  using namespace dialect;
  const NumberRules rules{{"OL", "----"}, 9.9e37};
  const auto elements = split_reply(reply);
  std::size_t characters = 0;
  for (const auto element : elements) characters += element.size();
  if (characters > reply.size()) return "elements hold more than the reply";

  const std::vector<std::string> units(elements.size(), "mV");
  const auto fields = read_reply(reply, units, rules);
  if (fields.size() != units.size()) return "not one field for each unit";
  for (std::size_t i = 0; i < fields.size(); ++i) {
    const auto& field = fields[i];
    if (!std::isfinite(field.value)) return "a value that is not finite";
    const bool number = field.quality == Quality::good || field.quality == Quality::unit_changed;
    if (!number && field.value != 0.0) return "a value where there is no number";
    if (number != field.why.empty() && field.quality != Quality::unit_changed)
      return "a fault without a reason";
    if (field.quality != Quality::good) continue;
    // Printed and read again, in the base unit that the field names, it is the same.
    const auto again = read_field(base::print_number(field.value) + " " + field.unit, "mV", rules);
    if (again.quality != Quality::good || again.value != field.value) return "print and read again differ";
  }
  // One element too many or too few: nothing is good.
  std::vector<std::string> more = units;
  more.emplace_back("V");
  for (const auto& field : read_reply(reply, more, rules)) {
    if (field.quality != Quality::invalid) return "a value although the number of elements is wrong";
  }
  if (const auto identity = read_identity(reply)) {
    if (identity->manufacturer.size() + identity->model.size() > reply.size())
      return "identity out of nothing";
  }
  if (const auto text = read_string(reply); text.ok() && text->size() + 2 > reply.size())
    return "string out of nothing";
  return {};
}

}  // namespace loadstair::fuzz
