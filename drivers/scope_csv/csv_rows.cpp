#include "drivers/scope_csv/csv_rows.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <utility>

#include "analysis/base/number.h"
#include "drivers/scope_csv/csv_field.h"
#include "drivers/scope_csv/csv_text.h"

namespace loadstair::scope_csv {
namespace {

constexpr std::size_t kBlockRows = 1024;
constexpr std::size_t kRowsToCompare = 8;
constexpr double kNan = std::numeric_limits<double>::quiet_NaN();

/// Places behind the decimal mark, and whether an exponent follows.
std::pair<std::size_t, bool> shape_of(std::string_view number, char mark) {
  const auto power = std::min(number.find_first_of("eE"), number.size());
  const auto point = number.substr(0, power).find(mark);
  return {point == std::string_view::npos ? 0 : power - point - 1, power != number.size()};
}

}  // namespace

RowDecoder::RowDecoder(const Layout& layout, std::string file_name, std::optional<std::size_t> time_column,
                       bool fast)
    : file_name_{std::move(file_name)},
      separator_{layout.separator},
      decimal_mark_{layout.decimal_mark},
      terminator_{layout.line_terminator},
      // With a comma for both, only quotes tell them apart, which the scanner does not look at.
      fast_{fast && layout.separator != layout.decimal_mark},
      first_line_{layout.data_line},
      time_column_{time_column},
      block_(layout.columns * kBlockRows),
      columns_(layout.columns),
      counts_(layout.columns) {
  for (std::size_t line = layout.data_line; line <= layout.head.size() && first_rows_.size() < kRowsToCompare;
       ++line) {
    first_rows_.emplace_back(layout.head[line - 1]);
  }
}

void RowDecoder::reserve(std::size_t rows) {
  for (auto& column : columns_) column.reserve(rows);
}

int RowDecoder::time_digits() const {
  const auto plain = base::print_integer(static_cast<std::int64_t>(largest_time_mantissa_));
  return std::max(plain_time_digits_, largest_time_mantissa_ == 0 ? 0 : static_cast<int>(plain.size()));
}

base::Outcome<void> RowDecoder::decode(std::string_view whole_lines) {
  const char* at = whole_lines.data();
  const char* const end = at + whole_lines.size();
  while (at != end) {
    if (fast_ && blank_lines_ == 0) {
      if (const char* next = decode_plain_numbers(at, end)) {
        at = next;
        continue;
      }
    }
    const char* stop = std::find(at, end, terminator_);
    if (auto row = decode_any({at, static_cast<std::size_t>(stop - at)}, false); !row) return row;
    at = stop == end ? end : stop + 1;
  }
  return {};
}

/// One row of plain numbers and empty fields. Returns where the next line begins, or null and leaves no
/// trace. Every scan stops at the line terminator at the latest, which belongs to no number and ends every
/// line.
const char* RowDecoder::decode_plain_numbers(const char* at, const char* end) {
  const std::size_t columns = columns_.size();
  std::uint64_t time_mantissa = 0;
  std::size_t blanks = 0;
  double* out = block_.data() + block_rows_;
  for (std::size_t k = 0; k < columns; ++k, out += kBlockRows) {
    while (*at == ' ') ++at;
    if (*at == separator_ || *at == '\r' || *at == terminator_) {
      if (k == time_column_) return nullptr;
      *out = kNan;
      ++blanks;
    } else {
      const PlainNumber number = scan_plain_number(at, decimal_mark_);
      if (number.end == nullptr) return nullptr;
      *out = number.value;
      if (k == time_column_) time_mantissa = number.mantissa;
      at = number.end;
      while (*at == ' ') ++at;
    }
    if (k + 1 == columns) break;
    if (*at != separator_) return nullptr;
    ++at;
  }
  while (*at == separator_ || *at == ' ') ++at;
  if (*at == '\r' && terminator_ == '\n') ++at;
  if (*at != terminator_ || at == end || blanks == columns) return nullptr;
  if (blanks != 0) {
    for (std::size_t k = 0; k < columns; ++k) {
      if (std::isnan(block_[k * kBlockRows + block_rows_])) ++counts_[k].blank;
    }
  }
  largest_time_mantissa_ = std::max(largest_time_mantissa_, time_mantissa);
  end_row();
  return at + 1;
}

base::Outcome<void> RowDecoder::decode_any(std::string_view line, bool is_cut_off) {
  if (is_blank(line)) {
    ++blank_lines_;
    return {};
  }
  if (blank_lines_ != 0) return refuse_line_behind_rows(line);
  const auto fields = split_fields(line, separator_);
  const std::size_t columns = columns_.size();
  std::vector<FieldValue> values;
  values.reserve(columns);
  for (std::size_t k = 0; k < std::min(columns, fields.size()); ++k) {
    const bool may_hold_mark = separator_ != decimal_mark_ || fields[k].in_quotes;
    values.push_back(read_field(fields[k].text, may_hold_mark ? decimal_mark_ : '.'));
    const bool wanted =
        k == time_column_ ? values[k].kind == FieldKind::kNumber : values[k].kind != FieldKind::kOther;
    if (wanted) continue;
    if (k == 0 && rows_ > 0 && values[k].kind == FieldKind::kOther && !is_cut_off) {
      // Not a slip in one field but a line of text: names or a preamble again, or a footer.
      const bool no_number = std::none_of(fields.begin(), fields.end(), [&](const Field& field) {
        return read_field(field.text, decimal_mark_).kind == FieldKind::kNumber;
      });
      if (no_number || fields.size() == 1) return refuse_line_behind_rows(line);
    }
    return refuse_field(line, fields[k].offset, k, fields[k].text, is_cut_off);
  }
  if (fields.size() < columns || filled_fields(fields) > columns)
    return refuse_width(line, fields.size(), is_cut_off);
  for (std::size_t k = 0; k < columns; ++k) {
    block_[k * kBlockRows + block_rows_] = values[k].value;
    counts_[k].clipped_high += values[k].kind == FieldKind::kClippedHigh ? 1 : 0;
    counts_[k].clipped_low += values[k].kind == FieldKind::kClippedLow ? 1 : 0;
    counts_[k].blank += values[k].kind == FieldKind::kBlank ? 1 : 0;
  }
  if (time_column_) {
    plain_time_digits_ = std::max(plain_time_digits_, significant_digits(fields[*time_column_].text));
  }
  end_row();
  return {};
}

base::Outcome<void> RowDecoder::finish(std::string_view last_line) {
  if (!is_blank(last_line)) {
    if (auto row = decode_any(last_line, true); !row) return row;
    if (is_shorter_than_before(last_line)) {
      const auto fields = split_fields(last_line, separator_);
      return refusal_at(
          file_name_, first_line_ + rows_ - 1, last_line, fields.back().offset,
          "the file ends without a line end inside this row: " + shown(fields.back().text) +
              " has fewer digits than the rows before; export or copy the file again, or take this "
              "line out to use the " +
              counted(rows_ - 1, "row") + " before it");
    }
  }
  flush();
  return {};
}

/// Rows that all print their last field alike, but not this one: the file may stop in the middle of a number.
bool RowDecoder::is_shorter_than_before(std::string_view last_line) const {
  const auto last_field = [&](std::string_view line) { return split_fields(line, separator_).back().text; };
  if (rows_ <= kRowsToCompare || first_rows_.size() < kRowsToCompare) return false;
  const auto usual = shape_of(last_field(first_rows_[0]), decimal_mark_);
  for (const auto& row : first_rows_) {
    if (last_field(row).empty() || shape_of(last_field(row), decimal_mark_) != usual) return false;
  }
  const auto last = last_field(last_line);
  const auto shape = shape_of(last, decimal_mark_);
  return base::parse_number(last, decimal_mark_) &&
         (shape.first < usual.first || (usual.second && !shape.second));
}

/// Nothing but blanks; with a time column, or one column alone, also nothing but separators, as spreadsheets
/// pad a file.
bool RowDecoder::is_blank(std::string_view line) const {
  const bool may_be_padding = time_column_ || columns_.size() == 1;
  return std::all_of(line.begin(), line.end(), [&](char c) {
    return c == separator_ ? may_be_padding : c == ' ' || c == '\t' || c == '\r';
  });
}

void RowDecoder::end_row() {
  ++rows_;
  if (++block_rows_ == kBlockRows) flush();
}

void RowDecoder::flush() {
  for (std::size_t k = 0; k < columns_.size(); ++k) {
    const double* first = block_.data() + k * kBlockRows;
    columns_[k].insert(columns_[k].end(), first, first + block_rows_);
  }
  block_rows_ = 0;
}

// --- What is wrong ---

base::Outcome<void> RowDecoder::refuse_line_behind_rows(std::string_view line) const {
  const auto fields = split_fields(line, separator_);
  return refusal_at(
      file_name_, first_line_ + rows_ + blank_lines_, line, fields.front().offset,
      shown(trimmed(line)) + " comes behind " + counted(rows_, "row") +
          " of numbers: a second block or a footer; a file holds one block of rows, so put this and "
          "what follows into a file of its own");
}

base::Refusal RowDecoder::refuse_field(std::string_view line, std::size_t offset, std::size_t field,
                                       std::string_view text, bool is_cut_off) const {
  const char other_mark = decimal_mark_ == '.' ? ',' : '.';
  std::string reason;
  if (is_cut_off && !text.empty()) {
    reason = "the file ends inside this row, in field " + text_of(field + 1) + " " + shown(text) +
             "; export or copy the file again, or take this line out to use the " + counted(rows_, "row") +
             " before it";
  } else if (field == time_column_ && read_field(text, decimal_mark_).kind == FieldKind::kBlank) {
    reason = "the time is missing in field " + text_of(field + 1) + "; each row has its time";
  } else if (read_field(text, other_mark).kind == FieldKind::kNumber) {
    reason = shown(text) + " has a decimal " + (other_mark == ',' ? "comma" : "point") +
             ", but the rows are read with a decimal " + (decimal_mark_ == ',' ? "comma" : "point") +
             "; say which it is (--decimal), or correct the field";
  } else {
    reason = shown(text) + " is not a number; field " + text_of(field + 1) +
             (field == time_column_
                  ? " is the time and takes a number"
                  : " takes a number, an infinity for a clipped sample, or nothing for a blank one");
  }
  if (rows_ == 0) reason += "; if the data begins further down, say where (--data-line)";
  return refusal_at(file_name_, first_line_ + rows_, line, offset, std::move(reason));
}

base::Outcome<void> RowDecoder::refuse_width(std::string_view line, std::size_t fields,
                                             bool is_cut_off) const {
  const std::size_t columns = columns_.size();
  const std::size_t line_number = first_line_ + rows_;
  if (fields > columns) {
    const auto all = split_fields(line, separator_);
    const auto found = std::find_if(all.begin() + static_cast<std::ptrdiff_t>(columns), all.end(),
                                    [](const Field& field) { return !field.text.empty(); });
    const auto& extra = found == all.end() ? all.back() : *found;
    return refusal_at(file_name_, line_number, line, extra.offset,
                      "field " + text_of(static_cast<std::size_t>(found - all.begin()) + 1) + " holds " +
                          shown(extra.text) + ", but the rows have " + counted(columns, "column") +
                          "; take it out, or fill the column in every row");
  }
  const std::size_t end = line.find_last_not_of(" \t\r") + 1;
  if (is_cut_off) {
    return refusal_at(file_name_, line_number, line, end,
                      "the file ends inside this row, after " + text_of(fields) + " of " + text_of(columns) +
                          " fields; export or copy the file again, or take this line out to use the " +
                          counted(rows_, "row") + " before it");
  }
  return refusal_at(file_name_, line_number, line, end,
                    "the row ends after " + text_of(fields) + " of " + text_of(columns) +
                        " fields; a blank sample still has its separator");
}

}  // namespace loadstair::scope_csv
