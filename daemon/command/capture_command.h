// The `capture` subcommand: a scope's CSV export analysed on its own, for a person or a script.
#pragma once

#include <cstddef>
#include <optional>
#include <ostream>
#include <string>

namespace loadstair::command {

/// What the command line says.
struct CaptureArguments {
  std::string file;
  std::string voltage;  ///< COLUMN[:SCALE]; COLUMN is a header name or a number from 1; empty: none named
  std::string current;
  int harmonics = 40;                   ///< highest order, 1 to 500
  std::optional<double> crest_band_hz;  ///< band of a second crest factor; nullopt: only the raw one
  bool json = false;
  // How to read the file, where it is not found out from the file itself. Empty: found out.
  std::string separator;  ///< "," ";" "|" "tab" or a tab itself
  std::string decimal;    ///< "." or ","
  std::optional<std::size_t> header_line;
  std::optional<std::size_t> unit_line;
  std::optional<std::size_t> data_line;
  std::string time_column;  ///< header name, number from 1, or "none"
  std::string interval;     ///< "2e-05", "20us", "20 us": seconds where no unit stands
};

/// Reads, analyses, prints to `out`: JSON as docs say, or what was understood and the figures in a table.
/// Returns: kGood; kUserInput with one message on `err` ("file:line:column: what came; what would be right")
/// when the file or an argument cannot be used.
int run_capture(const CaptureArguments& arguments, std::ostream& out, std::ostream& err);

}  // namespace loadstair::command
