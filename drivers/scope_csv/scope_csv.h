// scope_csv: a scope's CSV export, whatever its habits, to uniformly sampled columns. Says what it
// understood. Not for what the samples mean (analysis/waveform), nor for any file that is not one block of
// rows of numbers.
//
// How it reads. The head of the file (at most 256 kB) is looked at once to find the separator, the decimal
// mark, and where preamble, header, units and data lie; then the rows are decoded in one pass, chunk by chunk
// of whole lines, into blocks of columns. Only the blocks' sink (today: vectors that grow) knows whether the
// file fits in memory.
#pragma once

#include <cstddef>
#include <filesystem>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"
#include "drivers/scope_csv/samples.h"

namespace loadstair::scope_csv {

/// What the caller knows better than sniffing. Everything left empty is found out from the file.
struct Options {
  std::optional<char> separator;           ///< ',' ';' '\t' or '|'
  std::optional<char> decimal_mark;        ///< '.' or ','
  std::optional<std::size_t> header_line;  ///< line that names the columns, from 1; 0: no line does
  std::optional<std::size_t> unit_line;    ///< line that gives their units, from 1; 0: no line does
  std::optional<std::size_t> data_line;    ///< first line of numbers, from 1
  std::optional<std::string>
      time_column;                   ///< header name, or number from 1; "none": every column is a channel
  std::optional<double> interval_s;  ///< > 0; sampling interval in s: a time column is then not looked at
};

/// Where the sampling interval comes from.
enum class IntervalFrom { kTimeColumn, kPreamble, kOption };

/// What was made of the file. Lines and columns count from 1; 0 stands for "there is none".
struct Understood {
  bool byte_order_mark = false;
  std::string line_end;  ///< "LF", "CRLF" or "CR"
  char separator = ',';
  char decimal_mark = '.';
  std::size_t file_columns = 0;  ///< columns of the file, the time column among them
  std::size_t header_line = 0;
  std::size_t unit_line = 0;
  std::size_t data_line = 0;  ///< first line of numbers
  std::size_t rows = 0;       ///< samples of each channel
  std::size_t trailing_empty_fields =
      0;  ///< empty fields at the end of the first row that belong to no column
  IntervalFrom interval_from = IntervalFrom::kTimeColumn;
  std::size_t interval_line = 0;  ///< line of the preamble that states the interval or the sample rate
  std::size_t time_column = 0;
  std::string time_name;  ///< name of the time column
  std::string time_unit;  ///< as the file writes it ("ms"); "s" when the file does not say
  bool time_unit_stated = false;
  double time_resolution_s = 0.0;            ///< last printed digit of the times, in s
  double largest_deviation_s = 0.0;          ///< of a printed time from the uniform grid, in s
  std::vector<std::size_t> channel_columns;  ///< file column of each channel in Samples::columns
  std::vector<std::string> remarks;          ///< what a person should know besides: one sentence each

  /// All of it in plain sentences, for a person who compares them with the file.
  /// samples  the record read along with it.
  [[nodiscard]] std::vector<std::string> sentences(const Samples& samples) const;
};

/// A file read: the samples, and what was understood on the way.
struct ScopeFile {
  Samples samples;
  Understood understood;
};

/// Reads a scope's CSV export from memory.
/// bytes      the whole file: UTF-8 with or without byte-order mark (8-bit text in names is taken as
/// Latin-1), lines
///            ended by LF, CRLF or CR; preamble lines of any kind, then a header and a unit row or none of
///            them, then rows of numbers to the end. Fields may stand in double quotes. Empty fields and
///            "nan", "--", "n/a" are blank samples; "inf", "ol", "over", "clipped" and the like, with a sign
///            or none, are clipped ones, and so are SCPI's numbers for them (SCPI-1999 vol. 1, 7.2.1: 9.9E37
///            infinity, 9.91E37 not a number).
/// file_name  how messages call the file.
/// Returns: at least two rows and one channel; units reduced to their base ("mV" to V), times to s.
/// Interval: (last time - first time) / (rows - 1), each time lying on that grid within one printed digit or
/// 1 % of the
///            interval, whichever is more; else from the preamble (a sample interval or a sample rate).
/// Errors: place "file:line:column" (column in characters), reason what came and what would be right, for
/// what cannot
///            be read: a field that is no number, too few or too many fields, a last row cut off, a second
///            block, a gap or jitter in the times, an interval that nothing states, a layout that fits two
///            readings alike.
[[nodiscard]] base::Outcome<ScopeFile> read_scope_csv(std::string_view bytes, std::string_view file_name,
                                                      const Options& options = {});

/// The same from a file, read in chunks. Errors besides: the file cannot be opened or read (place: the path).
[[nodiscard]] base::Outcome<ScopeFile> read_scope_csv_file(const std::filesystem::path& path,
                                                           const Options& options = {});

/// The channel that a person names: by header name, or by the number of its column in the file, from 1 ("3"
/// or "#3"). Returns: index into Samples::columns. Errors (no place): no such column; the time column; a name
/// that several columns have; a number that is also the name of another column. The reason lists what there
/// is.
[[nodiscard]] base::Outcome<std::size_t> find_channel(const ScopeFile& file, std::string_view column);

}  // namespace loadstair::scope_csv
