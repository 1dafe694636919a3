#include "daemon/evaluation/ideal_capture.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <utility>

#include "analysis/base/number.h"

namespace loadstair::evaluation {
namespace {

constexpr std::size_t kSamples = 8000;  ///< ten cycles of 50 Hz at 40 kS/s
constexpr double kIntervalS = 25e-6;
constexpr double kFullScaleCounts = 4096.0;
constexpr double kLeastRipple = 1e-3;
constexpr double kUsualHz = 50.0;

struct Column {
  std::string name;
  std::vector<double> values;
};

/// A record's vertical steps: the span of what is shown, and a little more.
void round_to_counts(std::vector<double>& values) {
  double most = 0.0;
  for (const double value : values) most = std::max(most, std::abs(value));
  const double count = 2.5 * most / kFullScaleCounts;
  if (!(count > 0.0)) return;
  for (double& value : values) value = std::round(value / count) * count;
}

std::vector<double> sine(double mean, double rms, double hz) {
  std::vector<double> values(kSamples);
  for (std::size_t i = 0; i < kSamples; ++i) {
    const double angle = 2.0 * std::numbers::pi * hz * kIntervalS * static_cast<double>(i);
    values[i] = mean + std::numbers::sqrt2 * rms * std::sin(angle);
  }
  return values;
}

/// Columns by name, or by number where the hook-up file numbers them: then they stand at that place.
void put(std::vector<Column>& columns, const std::string& named, std::vector<double> values, double scale) {
  if (named.empty()) return;
  for (double& value : values) value /= scale;
  round_to_counts(values);
  const std::string digits = named.front() == '#' ? named.substr(1) : named;
  const auto number = base::parse_integer(digits);
  if (!number || *number < 2 || *number > 64) {
    columns.push_back({named, std::move(values)});
    return;
  }
  const auto place = static_cast<std::size_t>(*number - 1);
  while (columns.size() <= place) {
    columns.push_back({"column " + base::print_integer(static_cast<std::int64_t>(columns.size()) + 1),
                       std::vector<double>(kSamples, 0.0)});
  }
  columns[place].values = std::move(values);
}

void add_port(std::vector<Column>& columns, const setup::CaptureSource& source, const setup::Port& port,
              const PortTruth& truth, double output_hz) {
  const double hz = output_hz > 0.0 ? output_hz : kUsualHz;
  const double current_a = truth.current_a * truth.current_factor;
  if (port.kind == setup::PortKind::ac) {
    put(columns, source.voltage_column, sine(0.0, truth.voltage_v, hz), source.voltage_scale);
    put(columns, source.current_column, sine(0.0, current_a, hz), source.current_scale);
    return;
  }
  const double ripple_a = port.ripple_current_rms_a.value_or(kLeastRipple * current_a);
  const double ripple_v = port.source_resistance_ohm.value_or(0.0) * ripple_a;
  put(columns, source.voltage_column, sine(truth.voltage_v, -ripple_v, 2.0 * hz), source.voltage_scale);
  put(columns, source.current_column, sine(current_a, ripple_a, 2.0 * hz), source.current_scale);
}

std::string text_of(const std::vector<Column>& columns) {
  std::string text;
  for (std::size_t c = 0; c < columns.size(); ++c) text += (c == 0 ? "" : ",") + columns[c].name;
  text += "\n";
  for (std::size_t i = 0; i < kSamples; ++i) {
    for (std::size_t c = 0; c < columns.size(); ++c)
      text += (c == 0 ? "" : ",") + base::print_significant(columns[c].values[i], 9);
    text += "\n";
  }
  return text;
}

bool numbered(const setup::CaptureSource& source) {
  return base::parse_integer(source.voltage_column).has_value() ||
         base::parse_integer(source.current_column).has_value();
}

}  // namespace

void add_ideal_captures(store::StoredRun& run, const setup::Hookup& hookup, const setup::Stair& stair,
                        const StepTruth& truth, const store::StoredStep& step) {
  for (const setup::Instrument& scope : hookup.instruments) {
    std::vector<double> times(kSamples);
    for (std::size_t i = 0; i < kSamples; ++i) times[i] = kIntervalS * static_cast<double>(i);
    std::vector<Column> columns = {{"time", std::move(times)}};
    // Numbered columns first: they have their places.
    for (const bool by_number : {true, false}) {
      for (const setup::CaptureSource& source : hookup.captures) {
        if (source.instrument != scope.name || numbered(source) != by_number) continue;
        for (std::size_t p = 0; p < hookup.ports.size(); ++p) {
          if (hookup.ports[p].name != source.port) continue;
          add_port(columns, source, hookup.ports[p], truth.ports[p], stair.ratings.output_frequency_hz);
        }
      }
    }
    if (columns.size() == 1) continue;
    store::StoredCapture capture;
    capture.step = step.index;
    capture.file_name = scope.name + ".csv";
    capture.instrument = scope.name;
    capture.t_ns = *step.average_begin_ns + (*step.average_end_ns - *step.average_begin_ns) / 2;
    capture.bytes = text_of(columns);
    capture.size = static_cast<std::int64_t>(capture.bytes.size());
    run.captures.push_back(std::move(capture));
  }
}

}  // namespace loadstair::evaluation
