#include "drivers/scope_csv/csv_layout.h"

#include <algorithm>
#include <optional>
#include <utility>

#include "analysis/base/number.h"
#include "drivers/scope_csv/csv_field.h"
#include "drivers/scope_csv/csv_text.h"

namespace loadstair::scope_csv {
namespace {

constexpr std::size_t kMostColumns = 1024;
/// As many rows of numbers in succession are the data, not a preamble that happens to hold numbers.
constexpr std::size_t kSureRun = 3;
/// So far above the first such row another one is looked for, in case a broken row cut the data in two.
constexpr std::size_t kReach = 2;

/// One way to read the file, and how the head's lines look under it.
struct Reading {
  char separator = ',';
  char decimal_mark = '.';
  std::vector<std::size_t> fields;  ///< of each line that consists of numbers; 0 for other lines
  std::size_t first_row = 0;        ///< index of the line where the data begins
  std::size_t rows = 0;             ///< lines from there on that have the first row's number of fields
};

/// Fields of a line that consists of numbers, clipped and blank samples, one number at least; else 0.
std::size_t fields_of_numbers(std::string_view line, const Reading& reading) {
  std::size_t count = 0;
  bool has_number = false;
  for (const Field& field : split_fields(line, reading.separator)) {
    // With a comma for both, only a field in quotes can hold a decimal comma.
    const bool may_hold_mark = reading.separator != reading.decimal_mark || field.in_quotes;
    const auto value = read_field(field.text, may_hold_mark ? reading.decimal_mark : '.');
    if (value.kind == FieldKind::kOther) return 0;
    has_number = has_number || value.kind == FieldKind::kNumber;
    ++count;
  }
  return has_number ? count : 0;
}

/// Length of the run of equal counts that begins at `from`.
std::size_t run_length(const std::vector<std::size_t>& fields, std::size_t from) {
  std::size_t length = 0;
  while (from + length < fields.size() && fields[from] != 0 && fields[from + length] == fields[from])
    ++length;
  return length;
}

/// Index of the first row: of the first sure run, or of the longest one.
std::size_t find_first_row(const std::vector<std::size_t>& fields) {
  std::size_t best = 0;
  for (std::size_t at = 0; at < fields.size();) {
    const std::size_t length = run_length(fields, at);
    if (length > run_length(fields, best)) best = at;
    if (length >= kSureRun) break;
    at += std::max<std::size_t>(length, 1);
  }
  // A broken row near the top cuts the data in two: begin above it, so that it is refused rather than
  // skipped.
  for (std::size_t above = best; above-- > 0 && best - above <= kReach;) {
    if (fields[above] == fields[best] && fields[best] > 1) best = above;
  }
  return best;
}

void judge(Reading& reading, const std::vector<std::string_view>& lines, const Options& options) {
  reading.fields.reserve(lines.size());
  for (const auto line : lines) reading.fields.push_back(fields_of_numbers(line, reading));
  reading.first_row = options.data_line ? *options.data_line - 1 : find_first_row(reading.fields);
  if (reading.first_row >= lines.size()) return;
  const std::size_t width = reading.fields[reading.first_row];
  for (std::size_t at = reading.first_row; at < lines.size(); ++at) {
    if (width != 0 && reading.fields[at] == width) ++reading.rows;
  }
}

std::vector<Reading> all_readings(const Options& options) {
  std::vector<Reading> readings;
  for (const auto& [separator, mark] :
       {std::pair{',', '.'}, std::pair{';', ','}, std::pair{';', '.'}, std::pair{'\t', '.'},
        std::pair{'\t', ','}, std::pair{'|', '.'}, std::pair{'|', ','}, std::pair{',', ','}}) {
    if (options.separator.value_or(separator) != separator) continue;
    if (options.decimal_mark.value_or(mark) != mark) continue;
    readings.push_back({separator, mark, {}, 0, 0});
  }
  return readings;
}

/// "12" and "-3" are the same with either mark; "05" behind a mark can only be decimals.
bool looks_like_decimals(std::string_view line) {
  const auto fields = split_fields(line, ',');
  return fields.size() == 2 && fields[1].text.size() > 1 && fields[1].text.front() == '0';
}

/// Fields of the line above the data under a separator, 0 when it holds a number or is not there.
std::size_t names_above(const std::vector<std::string_view>& lines, const Reading& reading) {
  if (reading.first_row == 0) return 0;
  const auto fields = split_fields(lines[reading.first_row - 1], reading.separator);
  for (const auto& field : fields) {
    if (field.text.empty() || read_field(field.text, reading.decimal_mark).kind == FieldKind::kNumber)
      return 0;
  }
  return fields.size();
}

/// "1,5": two columns, or one with a decimal comma? Decided by decimals with leading zeros, then by the names
/// above.
std::optional<bool> is_one_column_with_comma(const std::vector<std::string_view>& lines, const Reading& two) {
  for (std::size_t at = two.first_row; at < lines.size(); ++at) {
    if (two.fields[at] == 2 && looks_like_decimals(lines[at])) return true;
  }
  const std::size_t names = names_above(lines, two);
  if (names == 0) return std::nullopt;
  return names == 1;
}

/// The reading under which most lines are rows; of equals the one listed first, if they do not contradict
/// each other.
base::Outcome<Reading> choose(std::vector<Reading> readings, const std::vector<std::string_view>& lines,
                              std::string_view file_name, const Options& options) {
  for (auto& reading : readings) judge(reading, lines, options);
  const auto best = std::max_element(readings.begin(), readings.end(),
                                     [](const Reading& a, const Reading& b) { return a.rows < b.rows; });
  const bool pairs_of_integers = best->separator == ',' && best->decimal_mark == '.' && best->rows > 0 &&
                                 best->fields[best->first_row] == 2;
  if (!pairs_of_integers) return std::move(*best);
  for (auto other = readings.begin(); other != readings.end(); ++other) {
    if (other->decimal_mark != ',' || other->separator == ',' || other->rows != best->rows) continue;
    const auto one_column = is_one_column_with_comma(lines, *best);
    if (one_column.value_or(false)) return std::move(*other);
    if (one_column) break;
    const auto line = lines[best->first_row];
    return refusal_at(
        file_name, best->first_row + 1, line, line.find(','),
        shown(trimmed(line)) +
            " may be two columns or one number with a decimal comma, and nothing in "
            "the file tells which; say which separator (--separator) or decimal mark (--decimal) it has");
  }
  return std::move(*best);
}

/// Why no reading fits, told on the line where the data was said to begin, or on the last line that holds
/// something.
base::Refusal no_rows(const std::vector<std::string_view>& lines, std::string_view file_name,
                      const Options& options) {
  std::size_t last = options.data_line.value_or(lines.size());
  while (last > 0 && trimmed(lines[last - 1]).empty()) --last;
  if (last == 0) {
    return refusal_at(file_name, 1, "", 0,
                      "the file holds nothing but blank lines; rows of numbers are wanted");
  }
  const auto line = lines[last - 1];
  Field worst;
  bool all_numbers = false;
  std::size_t most_fields = 0;
  for (const char separator : {',', ';', '\t', '|'}) {
    const auto fields = split_fields(line, separator);
    if (fields.size() <= most_fields) continue;
    most_fields = fields.size();
    const auto bad = std::find_if(fields.begin(), fields.end(), [](const Field& field) {
      return read_field(field.text, '.').kind == FieldKind::kOther &&
             read_field(field.text, ',').kind == FieldKind::kOther;
    });
    all_numbers = bad == fields.end();
    worst = all_numbers ? fields.front() : *bad;
  }
  if (all_numbers) {
    return refusal_at(
        file_name, last, line, worst.offset,
        "no other line with numbers in as many fields as this one is found; two rows are the least");
  }
  return refusal_at(file_name, last, line, worst.offset,
                    "no two rows of numbers are found in the file; this line has " + shown(worst.text) +
                        " where a number would be right");
}

struct HeadLines {
  std::vector<std::string_view> lines;
  char terminator = '\n';
  std::string end = "LF";
};

HeadLines cut_lines(std::string_view text, bool is_whole) {
  HeadLines head;
  const auto feed = text.find('\n');
  if (feed == std::string_view::npos && text.find('\r') != std::string_view::npos) {
    head.terminator = '\r';
    head.end = "CR";
  } else if (feed != std::string_view::npos && feed > 0 && text[feed - 1] == '\r') {
    head.end = "CRLF";
  }
  while (!text.empty()) {
    const auto end = text.find(head.terminator);
    if (end == std::string_view::npos && !is_whole) break;
    head.lines.push_back(text.substr(0, end));
    text.remove_prefix(end == std::string_view::npos ? text.size() : end + 1);
  }
  return head;
}

base::Outcome<void> check_options(const Options& options, std::string_view file_name) {
  const auto refuse = [&](std::string reason) {
    return base::Refusal{clean_text(file_name), std::move(reason)};
  };
  const auto is_one_of = [](std::optional<char> given, std::string_view allowed) {
    return !given || allowed.find(*given) != std::string_view::npos;
  };
  if (!is_one_of(options.separator, ",;\t|")) {
    return refuse("the separator may be a comma, a semicolon, a tab or a bar, not " +
                  shown(std::string_view{&*options.separator, 1}));
  }
  if (!is_one_of(options.decimal_mark, ".,")) {
    return refuse("the decimal mark may be a point or a comma, not " +
                  shown(std::string_view{&*options.decimal_mark, 1}));
  }
  if (options.data_line == 0U) return refuse("lines count from 1; the first line of numbers was given as 0");
  for (const auto& [given, what] :
       {std::pair{options.header_line, "names"}, std::pair{options.unit_line, "units"}}) {
    if (given && *given != 0 && options.data_line && *given >= *options.data_line) {
      return refuse("the line of " + std::string{what} + " was given as " + text_of(*given) +
                    ", which is not above the first line of numbers, " + text_of(*options.data_line));
    }
  }
  if (options.interval_s && !(*options.interval_s > 0.0 && *options.interval_s < 1e9)) {
    return refuse("the interval was given as " + base::print_number(*options.interval_s) +
                  " s; a time above 0 is wanted");
  }
  return {};
}

/// Encodings and contents that no reading of lines can help.
std::optional<base::Refusal> not_text(std::string_view head, std::string_view file_name) {
  if (head.empty()) return refusal_at(file_name, 1, "", 0, "the file is empty; rows of numbers are wanted");
  if (head.starts_with("\xFF\xFE") || head.starts_with("\xFE\xFF")) {
    return refusal_at(file_name, 1, "", 0, "the file is UTF-16 text; export or save it as UTF-8");
  }
  const auto zero = head.find('\0');
  if (zero == std::string_view::npos) return std::nullopt;
  const auto before = head.substr(0, zero);
  const auto line = static_cast<std::size_t>(std::count(before.begin(), before.end(), '\n')) + 1;
  const auto begin = before.rfind('\n') == std::string_view::npos ? 0 : before.rfind('\n') + 1;
  return refusal_at(file_name, line, head.substr(begin), zero - begin,
                    "a zero byte: this is no text file; export the record as CSV");
}

/// The line above the first row, when it looks like a broken row rather than names or preamble: it begins
/// with a number and has the width of a row, or holds only numbers behind a line of as many names as a row
/// has fields.
bool is_broken_row_above(const std::vector<std::string_view>& lines, const Reading& reading) {
  if (reading.first_row == 0) return false;
  const std::size_t width = reading.fields[reading.first_row];
  const auto above = split_fields(lines[reading.first_row - 1], reading.separator);
  const bool begins_with_number = read_field(above[0].text, reading.decimal_mark).kind == FieldKind::kNumber;
  if (width > 1 && above.size() == width && begins_with_number) return true;
  if (reading.first_row < 2 || reading.fields[reading.first_row - 1] == 0) return false;
  const auto names = split_fields(lines[reading.first_row - 2], reading.separator);
  return width > 1 && names.size() == width &&
         std::none_of(names.begin(), names.end(), [&](const Field& field) {
           return field.text.empty() ||
                  read_field(field.text, reading.decimal_mark).kind == FieldKind::kNumber;
         });
}

/// Width of the rows: up to the last field that is filled somewhere in the data or named above it.
std::size_t count_columns(const std::vector<std::string_view>& lines, const Reading& reading) {
  const std::size_t width = reading.fields[reading.first_row];
  std::size_t columns = 0;
  for (std::size_t at = reading.first_row; at < lines.size() && columns < width; ++at) {
    if (reading.fields[at] == width)
      columns = std::max(columns, filled_fields(split_fields(lines[at], reading.separator)));
  }
  for (std::size_t above = 1; above <= std::min<std::size_t>(2, reading.first_row); ++above) {
    const auto fields = split_fields(lines[reading.first_row - above], reading.separator);
    const std::size_t filled = filled_fields(fields);
    const bool all_filled = std::none_of(fields.begin(), fields.begin() + static_cast<std::ptrdiff_t>(filled),
                                         [](const Field& field) { return field.text.empty(); });
    if (all_filled && filled <= width) columns = std::max(columns, filled);
  }
  return columns;
}

}  // namespace

base::Outcome<Layout> find_layout(std::string_view head, bool is_whole, std::string_view file_name,
                                  const Options& options) {
  if (auto checked = check_options(options, file_name); !checked) return checked.refusal();
  if (auto refusal = not_text(head, file_name)) return *refusal;
  Layout layout;
  layout.byte_order_mark = head.starts_with("\xEF\xBB\xBF");
  const std::string_view text = head.substr(layout.byte_order_mark ? 3 : 0);
  HeadLines cut = cut_lines(text, is_whole);
  layout.line_terminator = cut.terminator;
  layout.line_end = std::move(cut.end);
  layout.head = std::move(cut.lines);
  if (options.data_line && *options.data_line > layout.head.size()) {
    return refusal_at(file_name, layout.head.size(), "", 0,
                      "the first line of numbers was given as " + text_of(*options.data_line) + ", but " +
                          (is_whole ? "the file has " : "the head of the file has ") +
                          counted(layout.head.size(), "line"));
  }
  auto chosen = choose(all_readings(options), layout.head, file_name, options);
  if (!chosen) return chosen.refusal();
  Reading& reading = *chosen;
  if (reading.rows < 2) return no_rows(layout.head, file_name, options);
  layout.separator = reading.separator;
  layout.decimal_mark = reading.decimal_mark;
  layout.columns = count_columns(layout.head, reading);
  layout.trailing_empty_fields = reading.fields[reading.first_row] - layout.columns;
  // The rows will refuse it, at its place.
  if (!options.data_line && is_broken_row_above(layout.head, reading)) --reading.first_row;
  layout.data_line = reading.first_row + 1;
  layout.data_offset = static_cast<std::size_t>(layout.head[reading.first_row].data() - head.data());
  if (layout.columns > kMostColumns) {
    return refusal_at(
        file_name, layout.data_line, "", 0,
        "the row has " + text_of(layout.columns) + " fields; at most " + text_of(kMostColumns) + " are read");
  }
  return layout;
}

}  // namespace loadstair::scope_csv
