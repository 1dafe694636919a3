// Inside the room: which column is the time, which are channels, and which are neither.
#pragma once

#include <cstddef>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"
#include "drivers/scope_csv/csv_labels.h"
#include "drivers/scope_csv/csv_layout.h"

namespace loadstair::scope_csv {

/// Columns by index.
struct ColumnRoles {
  std::optional<std::size_t> time;
  std::vector<std::size_t> other_times;  ///< repeat the time column; compared with it, then left out
  std::vector<std::size_t> left_out;     ///< a count of samples, or times where the caller gave the interval
  std::vector<std::size_t> channels;
  std::vector<std::string> remarks;
};

/// Finds the roles by what the caller says, by names and units, at last by values that rise evenly.
/// Errors: a time column that is not there or has a unit of something else; nothing that gives the interval;
/// no channel.
[[nodiscard]] base::Outcome<ColumnRoles> find_roles(const Layout& layout, const Labels& labels,
                                                    std::string_view file_name, const Options& options);

/// The column that a person names, by name or by number from 1 ("2" or "#2"), among `names` in the order of
/// the file. Errors (no place): there is none, several have the name, or it is the name of one and the number
/// of another.
[[nodiscard]] base::Outcome<std::size_t> find_column(const std::vector<std::string>& names,
                                                     std::string_view wanted);

}  // namespace loadstair::scope_csv
