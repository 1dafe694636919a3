// Inside the room: rows of numbers to columns, in one pass, chunk by chunk of whole lines.
#pragma once

#include <cstddef>
#include <cstdint>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"
#include "drivers/scope_csv/csv_layout.h"

namespace loadstair::scope_csv {

/// What a column's samples were besides numbers.
struct SampleCounts {
  std::size_t clipped_high = 0;
  std::size_t clipped_low = 0;
  std::size_t blank = 0;
};

/// Decodes rows. The fast way takes rows of plain numbers and empty fields; any other row goes the plain way,
/// field by field, which also finds what is wrong. Both give the same columns (tested on random files and by
/// the fuzz target).
class RowDecoder {
 public:
  /// time_column   index of the column whose every field must be a number
  /// fast          false: each row the plain way; the twin for tests
  RowDecoder(const Layout& layout, std::string file_name, std::optional<std::size_t> time_column,
             bool fast = true);

  /// Room for as many rows, so that columns need not move while they grow.
  void reserve(std::size_t rows);

  /// Rows of `whole_lines`, each of which ends in the layout's line terminator.
  /// Errors: place and reason of the first row that cannot be read.
  [[nodiscard]] base::Outcome<void> decode(std::string_view whole_lines);

  /// The end of the file: the text behind the last line terminator, empty when there is none.
  /// Errors: as decode; besides a last row that is cut off.
  [[nodiscard]] base::Outcome<void> finish(std::string_view last_line);

  [[nodiscard]] std::size_t rows() const { return rows_; }
  /// One vector a column, clipped and blank samples as NaN. Valid after finish().
  [[nodiscard]] std::vector<std::vector<double>>& columns() { return columns_; }
  [[nodiscard]] const std::vector<SampleCounts>& counts() const { return counts_; }
  /// Most significant digits that a field of the time column was printed with.
  [[nodiscard]] int time_digits() const;

 private:
  const char* decode_plain_numbers(const char* at, const char* end);
  base::Outcome<void> decode_any(std::string_view line, bool is_cut_off);
  base::Outcome<void> refuse_line_behind_rows(std::string_view line) const;
  base::Refusal refuse_field(std::string_view line, std::size_t offset, std::size_t field,
                             std::string_view text, bool is_cut_off) const;
  base::Outcome<void> refuse_width(std::string_view line, std::size_t fields, bool is_cut_off) const;
  bool is_shorter_than_before(std::string_view last_line) const;
  bool is_blank(std::string_view line) const;
  void end_row();
  void flush();

  std::string file_name_;
  char separator_;
  char decimal_mark_;
  char terminator_;
  bool fast_;
  std::size_t first_line_;
  std::vector<std::string> first_rows_;  ///< to see whether a last row without line end is cut off
  std::optional<std::size_t> time_column_;

  std::size_t rows_ = 0;
  std::size_t blank_lines_ = 0;  ///< since the last row
  std::vector<double> block_;    ///< columns of kBlockRows each
  std::size_t block_rows_ = 0;
  std::vector<std::vector<double>> columns_;
  std::vector<SampleCounts> counts_;
  std::uint64_t largest_time_mantissa_ = 0;
  int plain_time_digits_ = 0;
};

}  // namespace loadstair::scope_csv
