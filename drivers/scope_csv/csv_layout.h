// Inside the room: where in the file what lies, found from its head.
#pragma once

#include <cstddef>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"
#include "drivers/scope_csv/scope_csv.h"

namespace loadstair::scope_csv {

/// As much of a file as sniffing looks at, in bytes.
inline constexpr std::size_t kHeadBytes = std::size_t{128} * 1024;

/// Lines, separator, decimal mark and the first row of numbers.
struct Layout {
  bool byte_order_mark = false;
  char line_terminator = '\n';  ///< the byte that ends a line: '\r' where the file has no line feed
  std::string line_end;         ///< "LF", "CRLF", "CR"
  char separator = ',';
  char decimal_mark = '.';
  std::size_t columns = 0;  ///< without trailing fields that are always empty
  std::size_t trailing_empty_fields = 0;
  std::size_t data_line = 0;           ///< from 1
  std::size_t data_offset = 0;         ///< byte of the file where that line begins
  std::vector<std::string_view> head;  ///< the head's lines; views into the head
};

/// Finds the layout.
/// head      the first kHeadBytes of the file, or all of it
/// is_whole  the head is the whole file
/// Errors: as read_scope_csv.
[[nodiscard]] base::Outcome<Layout> find_layout(std::string_view head, bool is_whole,
                                                std::string_view file_name, const Options& options);

}  // namespace loadstair::scope_csv
