#include "analysis/series/checks.h"

#include <cmath>
#include <string>

#include "analysis/base/number.h"

namespace loadstair::series {

namespace {

std::string reading_number(std::size_t index) {
  return "reading " + base::print_integer(static_cast<std::int64_t>(index) + 1);
}

}  // namespace

std::optional<base::Refusal> fault_of(const TimeSeries& data) {
  if (data.time_s.size() != data.value.size()) {
    return base::Refusal{"", "a series needs as many instants as values, got " +
                                 base::print_integer(static_cast<std::int64_t>(data.time_s.size())) +
                                 " and " + base::print_integer(static_cast<std::int64_t>(data.value.size()))};
  }
  if (data.value.empty()) return base::Refusal{"", "no readings"};
  for (std::size_t i = 0; i < data.size(); ++i) {
    if (!std::isfinite(data.value[i]))
      return base::Refusal{reading_number(i), "its value is not a finite number"};
    if (!std::isfinite(data.time_s[i]))
      return base::Refusal{reading_number(i), "its time is not a finite number"};
    if (i > 0 && data.time_s[i] < data.time_s[i - 1]) {
      return base::Refusal{reading_number(i),
                           "it lies before the reading ahead of it; readings go in order of time"};
    }
  }
  return std::nullopt;
}

}  // namespace loadstair::series
