// Columns of text for a terminal. Of this room only.
#pragma once

#include <string>
#include <vector>

namespace loadstair::command {

using Row = std::vector<std::string>;

/// Rows of equal length under one another, two blanks between columns; the first one is the head.
[[nodiscard]] std::string table_of(const std::vector<Row>& rows);

}  // namespace loadstair::command
