// A capture's results as JSON and as text for a person. Prints what the analysis says and computes nothing.
#pragma once

#include <nlohmann/json_fwd.hpp>
#include <string>
#include <vector>

#include "analysis/waveform/waveform.h"
#include "drivers/scope_csv/scope_csv.h"

namespace loadstair::command {

/// What was read, and what came of it.
struct CaptureReport {
  std::string file;
  const scope_csv::ScopeFile& read;
  const waveform::WaveformResult& result;
  int harmonics = 40;  ///< highest order that was asked for
};

/// The object of `capture --json`: samples, interval_s, cycles, frequency_hz, channels, power, estimates, and
/// besides: file, understood and remarks (sentences). A figure that does not exist is {"value": null, "why":
/// ...}.
[[nodiscard]] nlohmann::ordered_json capture_json(const CaptureReport& report);

/// The same for a person.
[[nodiscard]] std::string capture_text(const CaptureReport& report);

/// The channels' names, each once: a name that comes again gets its column's number behind.
[[nodiscard]] std::vector<std::string> channel_names(const CaptureReport& report);

}  // namespace loadstair::command
