// scope_csv: a scope's CSV export, whatever its habits, to uniformly sampled columns. Says what it
// understood. Not for what the samples mean (analysis/waveform).
#pragma once

#include <string>
#include <vector>

namespace loadstair::scope_csv {

/// One column of samples as the file gives them.
struct SampleColumn {
  std::string name;  ///< from the header row, or "column 2"
  std::string unit;  ///< from the unit row or a "(V)" in the header; empty when the file has none
  std::vector<double>
      values;  ///< in the file's unit times its prefix ("mV" is scaled to V); NaN where clipped or blank
  std::size_t clipped_high = 0;  ///< samples that stood as +infinity
  std::size_t clipped_low = 0;   ///< samples that stood as -infinity
  std::size_t blank = 0;         ///< empty or not-a-number fields within the record
};

/// A uniformly sampled record.
struct Samples {
  double start_s = 0.0;               ///< time of the first sample as the file has it
  double interval_s = 0.0;            ///< > 0; from the time column (mean step) or the preamble
  std::vector<SampleColumn> columns;  ///< without the time column; all of one length
};

}  // namespace loadstair::scope_csv
