// Inside the room: what stands above the rows: names, units, and the facts of the preamble.
#pragma once

#include <cmath>
#include <cstddef>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"
#include "analysis/base/unit.h"
#include "drivers/scope_csv/csv_layout.h"

namespace loadstair::scope_csv {

/// What is written above one column.
struct ColumnLabel {
  std::string name;                      ///< "column 2" when nothing names it
  std::string written_unit;              ///< as the file writes it
  std::optional<base::ParsedUnit> unit;  ///< nullopt: none written, or one that is not known
  bool is_named = false;
};

/// A sampling interval, or its inverse, that the preamble states.
struct StatedInterval {
  double interval_s = 0.0;
  std::size_t line = 0;
};

struct Labels {
  std::size_t header_line = 0;
  std::size_t unit_line = 0;
  std::vector<ColumnLabel> columns;
  std::vector<StatedInterval> intervals;
  std::optional<double> stated_start_s;    ///< time of the first sample
  std::optional<std::size_t> stated_rows;  ///< number of samples
  std::vector<std::string> remarks;
};

/// A unit as scopes write it: base's units, in brackets or none, and words such as "Volts" and "seconds".
[[nodiscard]] std::optional<base::ParsedUnit> read_unit(std::string_view text);

/// A value in base units. Division by 1000 is exact where multiplication by 0.001 is not.
[[nodiscard]] inline double in_base(double value, double scale) {
  return scale < 1.0 ? value / std::round(1.0 / scale) : value * scale;
}

/// Reads names, units and preamble above the data.
/// Errors: a header or unit line that the options give and that does not fit the columns.
[[nodiscard]] base::Outcome<Labels> read_labels(const Layout& layout, std::string_view file_name,
                                                const Options& options);

/// Is this the name of a time axis?
[[nodiscard]] bool is_time_name(std::string_view name);

/// Is this the name of a count of samples?
[[nodiscard]] bool is_counter_name(std::string_view name);

}  // namespace loadstair::scope_csv
