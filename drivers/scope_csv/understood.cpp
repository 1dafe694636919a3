// What was made of a file, in sentences for the person who exported it.
#include <cstdint>

#include "analysis/base/number.h"
#include "drivers/scope_csv/csv_text.h"
#include "drivers/scope_csv/scope_csv.h"

namespace loadstair::scope_csv {
namespace {

std::string separator_sentence(const Understood& understood) {
  std::string text = "Text is UTF-8" +
                     std::string{understood.byte_order_mark ? " with a byte-order mark" : ""} +
                     ", lines end in " + understood.line_end + "; ";
  if (understood.file_columns == 1 && understood.trailing_empty_fields == 0) {
    text += "one column";
  } else {
    text += understood.separator == ','    ? "fields are separated by commas"
            : understood.separator == ';'  ? "fields are separated by semicolons"
            : understood.separator == '\t' ? "fields are separated by tabs"
                                           : "fields are separated by bars";
  }
  text += understood.decimal_mark == '.' ? ", the decimal mark is a point" : ", the decimal mark is a comma";
  if (understood.trailing_empty_fields != 0) {
    text +=
        "; " + counted(understood.trailing_empty_fields, "empty field") + " at the end of each row left out";
  }
  return text + ".";
}

std::string lines_sentence(const Understood& understood) {
  std::size_t first_label = understood.data_line;
  for (const std::size_t line : {understood.header_line, understood.unit_line}) {
    if (line != 0 && line < first_label) first_label = line;
  }
  std::string text;
  if (first_label == 2) text += "Line 1 is preamble, ";
  if (first_label > 2) text += "Lines 1 to " + text_of(first_label - 1) + " are preamble, ";
  if (understood.header_line != 0) text += "line " + text_of(understood.header_line) + " names the columns, ";
  if (understood.unit_line != 0) text += "line " + text_of(understood.unit_line) + " gives their units, ";
  text += "the data begins in line " + text_of(understood.data_line) + ": " +
          counted(understood.rows, "row") + ".";
  if (text[0] >= 'a' && text[0] <= 'z') text[0] = static_cast<char>(text[0] - 'a' + 'A');
  return text;
}

std::string time_sentence(const Understood& understood, const Samples& samples) {
  const std::string interval = short_number(samples.interval_s) + " s";
  const std::string rate = " (" + short_number(1.0 / samples.interval_s) + " samples a second)";
  if (understood.interval_from == IntervalFrom::kOption)
    return "The interval was given as " + interval + rate + ".";
  if (understood.interval_from == IntervalFrom::kPreamble) {
    return "Line " + text_of(understood.interval_line) + " states the interval, " + interval + rate + ".";
  }
  std::string text = "Column " + text_of(understood.time_column);
  if (!understood.time_name.empty()) text += ", " + shown(understood.time_name) + ",";
  text += " is the time in " + understood.time_unit;
  if (!understood.time_unit_stated) text += " (the unit is not stated)";
  text += ", from " + short_number(samples.start_s) + " s on; the interval is " + interval + rate +
          ", from the first and the last time over " + counted(understood.rows - 1, "step") +
          "; the times lie on it ";
  const bool is_exact = understood.largest_deviation_s < 1e-3 * understood.time_resolution_s;
  if (is_exact) {
    text += "to their last printed digit, " + short_number(understood.time_resolution_s) + " s.";
  } else {
    text += "within " + short_number(understood.largest_deviation_s) + " s, their last printed digit is " +
            short_number(understood.time_resolution_s) + " s.";
  }
  return text;
}

std::string channel_sentence(const SampleColumn& column, std::size_t number) {
  std::string text = "Column " + text_of(number);
  if (column.name != "column " + text_of(number)) text += ", " + shown(column.name) + ",";
  text += column.unit.empty() ? " is a channel without a unit" : " is a channel in " + column.unit;
  std::string gaps;
  const auto add = [&gaps](std::size_t count, const char* what) {
    if (count != 0) gaps += (gaps.empty() ? "" : ", ") + text_of(count) + what;
  };
  add(column.clipped_high, " clipped high");
  add(column.clipped_low, " clipped low");
  add(column.blank, " blank");
  if (!gaps.empty()) text += "; of its samples " + gaps;
  return text + ".";
}

}  // namespace

std::vector<std::string> Understood::sentences(const Samples& samples) const {
  std::vector<std::string> all{separator_sentence(*this), lines_sentence(*this),
                               time_sentence(*this, samples)};
  for (std::size_t k = 0; k < samples.columns.size() && k < channel_columns.size(); ++k) {
    all.push_back(channel_sentence(samples.columns[k], channel_columns[k]));
  }
  all.insert(all.end(), remarks.begin(), remarks.end());
  return all;
}

}  // namespace loadstair::scope_csv
