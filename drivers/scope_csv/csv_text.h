// Inside the room: lines, fields, and foreign text made fit for messages and names.
#pragma once

#include <cstddef>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"

namespace loadstair::scope_csv {

/// Without spaces, tabs and carriage returns at both ends.
[[nodiscard]] std::string_view trimmed(std::string_view text);

/// One field of a line.
struct Field {
  std::string_view text;   ///< trimmed, without the quotes around it; doubled quotes inside stay doubled
  std::size_t offset = 0;  ///< byte of the line where `text` begins
  bool in_quotes = false;
};

/// Cuts a line at each separator that stands outside double quotes. A quote that never closes ends with the
/// line. Cost: linear. An empty line is one empty field.
[[nodiscard]] std::vector<Field> split_fields(std::string_view line, char separator);

/// Number of fields up to the last one that is not empty.
[[nodiscard]] std::size_t filled_fields(const std::vector<Field>& fields);

/// Text fit for a name: valid UTF-8 stays, anything else is read as Latin-1; control characters become
/// spaces.
[[nodiscard]] std::string clean_text(std::string_view foreign);

/// The text of a field as a name: clean, doubled quotes single.
[[nodiscard]] std::string field_name(const Field& field);

/// Foreign text for a message: in quotes, at most 40 characters, control bytes as "\x07".
[[nodiscard]] std::string shown(std::string_view foreign);

/// Lower case of the ASCII letters.
[[nodiscard]] std::string lower(std::string_view text);

/// A refusal at a place of the file.
/// line    from 1
/// offset  byte within `text`; told as a column in characters from 1
[[nodiscard]] base::Refusal refusal_at(std::string_view file_name, std::size_t line, std::string_view text,
                                       std::size_t offset, std::string reason);

/// A count in words of a message: "1 row", "3 rows".
[[nodiscard]] std::string counted(std::size_t count, std::string_view noun);

/// A number for a message: six digits at most, the shortest way.
[[nodiscard]] std::string short_number(double value);

/// A count as text.
[[nodiscard]] std::string text_of(std::size_t count);

}  // namespace loadstair::scope_csv
