#include "drivers/scope_csv/scope_csv.h"

#include <algorithm>
#include <cerrno>
#include <cmath>
#include <cstdint>
#include <fstream>
#include <system_error>
#include <utility>

#include "analysis/base/number.h"
#include "drivers/scope_csv/column_roles.h"
#include "drivers/scope_csv/csv_labels.h"
#include "drivers/scope_csv/csv_layout.h"
#include "drivers/scope_csv/csv_rows.h"
#include "drivers/scope_csv/csv_text.h"
#include "drivers/scope_csv/plain_twin.h"
#include "drivers/scope_csv/time_axis.h"

namespace loadstair::scope_csv {
namespace {

constexpr std::size_t kChunkBytes = std::size_t{1024} * 1024;

void apply_scale(std::vector<double>& values, double scale) {
  if (scale == 1.0) return;
  for (double& value : values) value = in_base(value, scale);
}

/// One file on its way from head to samples.
class FileReader {
 public:
  FileReader(std::string file_name, const Options& options, bool fast = true)
      : file_name_{std::move(file_name)}, options_{options}, fast_{fast} {}

  /// Looks at the head. file_bytes: size of the whole file, to make room for its rows.
  base::Outcome<void> begin(std::string_view head, bool is_whole, std::size_t file_bytes) {
    auto layout = find_layout(head, is_whole, file_name_, options_);
    if (!layout) return layout.refusal();
    layout_ = std::move(*layout);
    auto labels = read_labels(layout_, file_name_, options_);
    if (!labels) return labels.refusal();
    labels_ = std::move(*labels);
    auto roles = find_roles(layout_, labels_, file_name_, options_);
    if (!roles) return roles.refusal();
    roles_ = std::move(*roles);
    decoder_.emplace(layout_, file_name_, roles_.time, fast_);
    const std::size_t rows_in_head = layout_.head.size() - layout_.data_line + 1;
    const std::size_t row_bytes =
        std::max<std::size_t>((head.size() - layout_.data_offset) / rows_in_head, 1);
    decoder_->reserve((file_bytes - layout_.data_offset) / row_bytes + 1);
    layout_.head.clear();
    return {};
  }

  std::size_t data_offset() const { return layout_.data_offset; }

  /// Takes the whole lines of `bytes`; returns how many bytes those were.
  base::Outcome<std::size_t> take(std::string_view bytes) {
    const auto last = bytes.rfind(layout_.line_terminator);
    const std::size_t whole = last == std::string_view::npos ? 0 : last + 1;
    if (auto decoded = decoder_->decode(bytes.substr(0, whole)); !decoded) return decoded.refusal();
    return whole;
  }

  base::Outcome<ScopeFile> finish(std::string_view last_line) {
    if (auto ended = decoder_->finish(last_line); !ended) return ended.refusal();
    if (decoder_->rows() < 2) {
      return refusal_at(file_name_, layout_.data_line, "", 0,
                        "the file has 1 row of numbers; two are the least");
    }
    ScopeFile file;
    note_layout(file.understood);
    if (auto timed = roles_.time ? time_from_column(file) : time_from_statement(file); !timed)
      return timed.refusal();
    move_channels(file);
    note_stated_rows(file.understood);
    return file;
  }

 private:
  void note_layout(Understood& understood) {
    understood.byte_order_mark = layout_.byte_order_mark;
    understood.line_end = layout_.line_end;
    understood.separator = layout_.separator;
    understood.decimal_mark = layout_.decimal_mark;
    understood.file_columns = layout_.columns;
    understood.header_line = labels_.header_line;
    understood.unit_line = labels_.unit_line;
    understood.data_line = layout_.data_line;
    understood.rows = decoder_->rows();
    understood.trailing_empty_fields = layout_.trailing_empty_fields;
    understood.remarks = std::move(labels_.remarks);
    understood.remarks.insert(understood.remarks.end(), roles_.remarks.begin(), roles_.remarks.end());
  }

  double time_scale(std::size_t column) const {
    const auto& unit = labels_.columns[column].unit;
    return unit && unit->unit == "s" ? unit->scale : 1.0;
  }

  base::Outcome<void> time_from_column(ScopeFile& file) {
    const std::size_t column = *roles_.time;
    const auto& label = labels_.columns[column];
    auto& times = decoder_->columns()[column];
    apply_scale(times, time_scale(column));
    const TimeCheck check = check_times(times, decoder_->time_digits());
    if (check.fault) {
      return refusal_at(file_name_, layout_.data_line + check.fault->row, "", 0, check.fault->reason);
    }
    for (const std::size_t other : roles_.other_times) {
      if (auto same = compare_times(other, times, check.grid); !same) return same;
    }
    Understood& understood = file.understood;
    file.samples.start_s = check.grid.start_s;
    file.samples.interval_s = check.grid.interval_s;
    understood.interval_from = IntervalFrom::kTimeColumn;
    understood.time_column = column + 1;
    understood.time_name = label.is_named ? label.name : "";
    understood.time_unit_stated = label.unit.has_value();
    understood.time_unit = label.unit ? label.written_unit : "s";
    understood.time_resolution_s = check.grid.resolution_s;
    understood.largest_deviation_s = check.grid.largest_deviation_s;
    for (const auto& stated : labels_.intervals) {
      if (std::abs(stated.interval_s - check.grid.interval_s) <= 1e-3 * stated.interval_s) continue;
      understood.remarks.push_back("Line " + text_of(stated.line) + " states a sampling interval of " +
                                   short_number(stated.interval_s) + " s, the times say " +
                                   short_number(check.grid.interval_s) + " s; the times are used.");
      break;
    }
    return {};
  }

  /// A second time column must say what the first one says.
  base::Outcome<void> compare_times(std::size_t other, const std::vector<double>& times,
                                    const TimeGrid& grid) {
    auto& repeated = decoder_->columns()[other];
    apply_scale(repeated, time_scale(other));
    const double tolerance_s = std::max(grid.resolution_s, 0.01 * grid.interval_s);
    for (std::size_t row = 0; row < times.size(); ++row) {
      if (std::abs(repeated[row] - times[row]) <= tolerance_s) continue;
      return refusal_at(
          file_name_, layout_.data_line + row, "", 0,
          "column " + text_of(other + 1) + " is a second time and differs from column " +
              text_of(*roles_.time + 1) +
              "; a file holds one time base, so put channels with another one into a file of their own");
    }
    return {};
  }

  base::Outcome<void> time_from_statement(ScopeFile& file) {
    Understood& understood = file.understood;
    file.samples.start_s = labels_.stated_start_s.value_or(0.0);
    if (options_.interval_s) {
      file.samples.interval_s = *options_.interval_s;
      understood.interval_from = IntervalFrom::kOption;
    } else {
      file.samples.interval_s = labels_.intervals.front().interval_s;
      understood.interval_from = IntervalFrom::kPreamble;
      understood.interval_line = labels_.intervals.front().line;
    }
    return {};
  }

  void move_channels(ScopeFile& file) {
    for (const std::size_t index : roles_.channels) {
      const auto& label = labels_.columns[index];
      const auto& counts = decoder_->counts()[index];
      SampleColumn column;
      column.name = label.name;
      column.unit = label.unit ? label.unit->unit : label.written_unit;
      column.values = std::move(decoder_->columns()[index]);
      if (label.unit) apply_scale(column.values, label.unit->scale);
      column.clipped_high = counts.clipped_high;
      column.clipped_low = counts.clipped_low;
      column.blank = counts.blank;
      if (!label.unit && !label.written_unit.empty()) {
        file.understood.remarks.push_back("The unit " + shown(label.written_unit) + " of column " +
                                          text_of(index + 1) +
                                          " is not known; its values are taken as they stand.");
      }
      file.understood.channel_columns.push_back(index + 1);
      file.samples.columns.push_back(std::move(column));
    }
  }

  void note_stated_rows(Understood& understood) const {
    if (!labels_.stated_rows || *labels_.stated_rows == understood.rows) return;
    understood.remarks.push_back("The preamble announces " + counted(*labels_.stated_rows, "sample") +
                                 "; the file holds " + text_of(understood.rows) + ".");
  }

  std::string file_name_;
  const Options& options_;
  bool fast_;
  Layout layout_;
  Labels labels_;
  ColumnRoles roles_;
  std::optional<RowDecoder> decoder_;
};

base::Refusal file_refusal(const std::filesystem::path& path, std::string_view tried, int error) {
  return {clean_text(path.string()),
          "cannot " + std::string{tried} + " the file: " + std::generic_category().message(error)};
}

base::Outcome<ScopeFile> read_bytes(std::string_view bytes, FileReader reader) {
  const auto head = bytes.substr(0, kHeadBytes);
  if (auto begun = reader.begin(head, head.size() == bytes.size(), bytes.size()); !begun)
    return begun.refusal();
  const auto rows = bytes.substr(reader.data_offset());
  const auto taken = reader.take(rows);
  if (!taken) return taken.refusal();
  return reader.finish(rows.substr(*taken));
}

/// Fills `buffer` from `used` on; returns the bytes in it.
std::size_t fill(std::ifstream& stream, std::string& buffer, std::size_t used) {
  stream.read(buffer.data() + used, static_cast<std::streamsize>(buffer.size() - used));
  return used + static_cast<std::size_t>(stream.gcount());
}

}  // namespace

base::Outcome<ScopeFile> read_scope_csv(std::string_view bytes, std::string_view file_name,
                                        const Options& options) {
  return read_bytes(bytes, FileReader{std::string{file_name}, options});
}

base::Outcome<ScopeFile> read_scope_csv_plainly(std::string_view bytes, std::string_view file_name,
                                                const Options& options) {
  return read_bytes(bytes, FileReader{std::string{file_name}, options, false});
}

base::Outcome<ScopeFile> read_scope_csv_file(const std::filesystem::path& path, const Options& options) {
  std::error_code error;
  if (std::filesystem::is_directory(path, error)) return file_refusal(path, "read", EISDIR);
  std::ifstream stream{path, std::ios::binary};
  if (!stream) return file_refusal(path, "open", errno);
  const auto size = std::filesystem::file_size(path, error);
  FileReader reader{path.string(), options};
  std::string buffer(kChunkBytes, '\0');
  std::size_t used = fill(stream, buffer, 0);
  const bool is_whole = used <= kHeadBytes && !stream;
  const auto head = std::string_view{buffer}.substr(0, std::min(used, kHeadBytes));
  if (auto begun = reader.begin(head, is_whole, error ? used : std::max<std::size_t>(size, used)); !begun) {
    return begun.refusal();
  }
  std::size_t begin = reader.data_offset();
  for (;;) {
    const auto taken = reader.take(std::string_view{buffer}.substr(begin, used - begin));
    if (!taken) return taken.refusal();
    begin += *taken;
    if (stream.bad()) return file_refusal(path, "read", errno);
    if (!stream) return reader.finish(std::string_view{buffer}.substr(begin, used - begin));
    buffer.replace(0, used - begin, buffer, begin, used - begin);
    used -= begin;
    begin = 0;
    // A line longer than half a chunk asks for a longer one.
    if (2 * used > buffer.size()) buffer.resize(2 * buffer.size());
    used = fill(stream, buffer, used);
  }
}

base::Outcome<std::size_t> find_channel(const ScopeFile& file, std::string_view column) {
  const Understood& understood = file.understood;
  std::vector<std::string> names(understood.file_columns);
  for (std::size_t k = 0; k < names.size(); ++k) names[k] = "column " + text_of(k + 1);
  if (understood.time_column != 0 && !understood.time_name.empty()) {
    names[understood.time_column - 1] = understood.time_name;
  }
  for (std::size_t k = 0; k < understood.channel_columns.size(); ++k) {
    names[understood.channel_columns[k] - 1] = file.samples.columns[k].name;
  }
  const auto found = find_column(names, column);
  if (!found) return found.refusal();
  const auto& channels = understood.channel_columns;
  const auto at = std::find(channels.begin(), channels.end(), *found + 1);
  if (at == channels.end()) {
    return base::Refusal{"", "column " + text_of(*found + 1) + ", " + shown(names[*found]) +
                                 (*found + 1 == understood.time_column ? ", is the time, not a channel"
                                                                       : ", is not a channel")};
  }
  return static_cast<std::size_t>(at - channels.begin());
}

}  // namespace loadstair::scope_csv
