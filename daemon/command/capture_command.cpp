#include "daemon/command/capture_command.h"

#include <cmath>
#include <nlohmann/json.hpp>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/base/unit.h"
#include "analysis/waveform/waveform.h"
#include "daemon/command/capture_report.h"
#include "daemon/command/user_error.h"
#include "drivers/scope_csv/scope_csv.h"

namespace loadstair::command {
namespace {

using base::Outcome;
using base::Refusal;

constexpr int kMostHarmonics = 500;

Outcome<std::optional<char>> separator_of(const std::string& text) {
  if (text.empty()) return std::optional<char>{};
  if (text == "tab" || text == "\\t") return std::optional<char>{'\t'};
  if (text.size() == 1) return std::optional<char>{text[0]};
  return Refusal{"--separator", "\"" + text + "\" is not one of , ; | or tab"};
}

Outcome<std::optional<char>> decimal_mark_of(const std::string& text) {
  if (text.empty()) return std::optional<char>{};
  if (text == "point") return std::optional<char>{'.'};
  if (text == "comma") return std::optional<char>{','};
  if (text.size() == 1) return std::optional<char>{text[0]};
  return Refusal{"--decimal", "\"" + text + "\" is not . or ,"};
}

/// "2e-05", "20us", "20 us".
Outcome<std::optional<double>> interval_of(const std::string& text) {
  if (text.empty()) return std::optional<double>{};
  const auto unit_at = text.find_last_of("0123456789.") + 1;
  const auto number = base::parse_number(std::string_view{text}.substr(0, unit_at));
  const auto written = text.substr(std::min(text.find_first_not_of(' ', unit_at), text.size()));
  const auto unit = written.empty() ? base::ParsedUnit{1.0, "s"} : base::parse_unit(written);
  if (!number || !unit || unit->unit != "s") {
    return Refusal{"--interval", "\"" + text + "\" is not a time; write it like 2e-05 or \"20 us\""};
  }
  // 50 us is 50 / 1e6 s to the last bit, which 50 * 1e-6 is not.
  return std::optional<double>{unit->scale < 1.0 ? *number / std::round(1.0 / unit->scale)
                                                 : *number * unit->scale};
}

Outcome<scope_csv::Options> options_of(const CaptureArguments& arguments) {
  scope_csv::Options options;
  const auto separator = separator_of(arguments.separator);
  if (!separator) return separator.refusal();
  const auto decimal = decimal_mark_of(arguments.decimal);
  if (!decimal) return decimal.refusal();
  const auto interval = interval_of(arguments.interval);
  if (!interval) return interval.refusal();
  options.separator = *separator;
  options.decimal_mark = *decimal;
  options.interval_s = *interval;
  options.header_line = arguments.header_line;
  options.unit_line = arguments.unit_line;
  options.data_line = arguments.data_line;
  if (!arguments.time_column.empty()) options.time_column = arguments.time_column;
  return options;
}

/// A channel that the command line names, with what its samples are multiplied by.
struct NamedChannel {
  std::size_t index = 0;
  double scale = 1.0;
  bool is_scaled = false;
};

/// COLUMN[:SCALE]. A header name may hold a colon itself: the whole text is tried as a name first.
Outcome<NamedChannel> find_named(const scope_csv::ScopeFile& file, const std::string& text,
                                 const char* option) {
  const auto whole = scope_csv::find_channel(file, text);
  if (whole) return NamedChannel{*whole, 1.0, false};
  const auto colon = text.rfind(':');
  if (colon == std::string::npos) return Refusal{option, whole.refusal().reason};
  const auto column = scope_csv::find_channel(file, text.substr(0, colon));
  if (!column) return Refusal{option, column.refusal().reason};
  const auto scale = base::parse_number(std::string_view{text}.substr(colon + 1));
  if (!scale || *scale == 0.0) {
    return Refusal{option,
                   "\"" + text.substr(colon + 1) +
                       "\" is not a scale; write COLUMN:SCALE with a number other than zero, such as 2:10"};
  }
  return NamedChannel{*column, *scale, true};
}

/// Names one channel as the voltage or the current and gives it that unit.
Outcome<std::optional<std::size_t>> name_channel(const scope_csv::ScopeFile& file, const std::string& text,
                                                 const char* option, const std::string& unit,
                                                 waveform::Waveform& record) {
  if (text.empty()) return std::optional<std::size_t>{};
  const auto named = find_named(file, text, option);
  if (!named) return named.refusal();
  auto& channel = record.channels[named->index];
  if (!channel.unit.empty() && channel.unit != unit && !named->is_scaled) {
    return Refusal{option, "column \"" + channel.name + "\" is in " + channel.unit + "; say how many " +
                               unit + " one of them is, as COLUMN:SCALE"};
  }
  channel.unit = unit;
  channel.scale = named->scale;
  return std::optional<std::size_t>{named->index};
}

Outcome<waveform::Waveform> record_of(const scope_csv::ScopeFile& file, const CaptureArguments& arguments) {
  waveform::Waveform record;
  record.interval_s = file.samples.interval_s;
  for (const auto& column : file.samples.columns) {
    waveform::Channel channel;
    channel.name = column.name;
    channel.unit = column.unit;
    channel.values = column.values;
    channel.clipped_high = column.clipped_high;
    channel.clipped_low = column.clipped_low;
    record.channels.push_back(std::move(channel));
  }
  const auto voltage = name_channel(file, arguments.voltage, "--voltage", "V", record);
  if (!voltage) return voltage.refusal();
  const auto current = name_channel(file, arguments.current, "--current", "A", record);
  if (!current) return current.refusal();
  record.voltage = *voltage;
  record.current = *current;
  if (record.voltage && record.voltage == record.current) {
    return Refusal{"--current", "column \"" + record.channels[*record.current].name +
                                    "\" is the voltage already; name another one"};
  }
  return record;
}

Outcome<void> capture(const CaptureArguments& arguments, std::ostream& out) {
  if (arguments.harmonics < 1 || arguments.harmonics > kMostHarmonics) {
    return Refusal{"--harmonics", base::print_integer(arguments.harmonics) + " is not an order from 1 to " +
                                      base::print_integer(kMostHarmonics)};
  }
  if (arguments.crest_band_hz &&
      !(*arguments.crest_band_hz > 0.0 && std::isfinite(*arguments.crest_band_hz))) {
    return Refusal{"--crest-band",
                   base::print_number(*arguments.crest_band_hz) + " is not a frequency in Hz above zero"};
  }
  const auto options = options_of(arguments);
  if (!options) return options.refusal();
  const auto file = scope_csv::read_scope_csv_file(arguments.file, *options);
  if (!file) return file.refusal();
  const auto record = record_of(*file, arguments);
  if (!record) return record.refusal();
  waveform::AnalysisSettings settings;
  settings.harmonics = arguments.harmonics;
  settings.crest_band_hz = arguments.crest_band_hz;
  const auto result = waveform::analyse(*record, settings);
  if (!result) {
    const auto& refusal = result.refusal();
    return Refusal{arguments.file,
                   refusal.place.empty() ? refusal.reason : refusal.place + ": " + refusal.reason};
  }
  const CaptureReport report{arguments.file, *file, *result, arguments.harmonics};
  if (arguments.json) {
    out << capture_json(report).dump(2) << "\n";
  } else {
    out << capture_text(report);
  }
  return {};
}

}  // namespace

int run_capture(const CaptureArguments& arguments, std::ostream& out, std::ostream& err) {
  const auto done = capture(arguments, out);
  if (done) return kGood;
  err << done.refusal().text() << "\n";
  return kUserInput;
}

}  // namespace loadstair::command
