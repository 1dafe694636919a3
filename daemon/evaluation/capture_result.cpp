#include "daemon/evaluation/capture_result.h"

#include <utility>

#include "analysis/base/number.h"
#include "daemon/evaluation/quantity.h"
#include "drivers/scope_csv/scope_csv.h"

namespace loadstair::evaluation {
namespace {

using waveform::ChannelQuote;
using waveform::ChannelResult;

constexpr int kHarmonics = 40;

std::optional<waveform::ChannelAccuracy> accuracy_of(const setup::CaptureSource& source, bool voltage) {
  const double percent = voltage ? source.voltage_gain_percent : source.current_gain_percent;
  if (!(percent > 0.0)) return std::nullopt;
  waveform::ChannelAccuracy accuracy;
  accuracy.owner = {source.instrument, voltage ? "voltage probe" : "current probe",
                    voltage ? source.voltage_column : source.current_column};
  accuracy.gain = percent / 100.0;
  // What is declared is the delay between the two: all of it is given to the current.
  accuracy.delay_s = voltage ? 0.0 : source.delay_tolerance_s;
  return accuracy;
}

/// Adds one column of the file; nullopt when the source names none. Refusal: the file has no such column.
base::Outcome<std::optional<std::size_t>> add_column(const scope_csv::ScopeFile& file,
                                                     const std::string& column, double scale,
                                                     const std::string& unit, waveform::Waveform& into) {
  if (column.empty()) return std::optional<std::size_t>{};
  const auto found = scope_csv::find_channel(file, column);
  if (!found) return found.refusal();
  const scope_csv::SampleColumn& samples = file.samples.columns[*found];
  waveform::Channel channel;
  channel.name = column;
  channel.unit = unit;
  channel.values = samples.values;
  channel.scale = scale;
  channel.clipped_high = samples.clipped_high;
  channel.clipped_low = samples.clipped_low;
  into.channels.push_back(std::move(channel));
  return std::optional{into.channels.size() - 1};
}

void analyse(const store::StoredCapture& stored, const setup::Stair& stair, const WindowContext& context,
             CaptureAnalysis& into) {
  const setup::CaptureSource& source = *into.source;
  const auto file = scope_csv::read_scope_csv(stored.bytes, stored.file_name);
  if (!file) {
    into.result = file.refusal();
    return;
  }
  waveform::Waveform waveform;
  waveform.interval_s = file->samples.interval_s;
  const auto voltage = add_column(*file, source.voltage_column, source.voltage_scale, "V", waveform);
  const auto current = add_column(*file, source.current_column, source.current_scale, "A", waveform);
  if (!voltage || !current) {
    into.result = base::Refusal{stored.file_name, (voltage ? current : voltage).refusal().text()};
    return;
  }
  into.voltage = waveform.voltage = *voltage;
  into.current = waveform.current = *current;
  waveform::AnalysisSettings settings;
  settings.harmonics = kHarmonics;
  const bool alternating = into.port != nullptr && into.port->kind == setup::PortKind::ac;
  settings.expected = alternating ? waveform::Expected::alternating : waveform::Expected::direct;
  if (alternating && into.port->direction == setup::Direction::output &&
      stair.ratings.output_frequency_hz > 0.0) {
    settings.fundamental_hz = stair.ratings.output_frequency_hz;
  }
  into.result = waveform::analyse(waveform, settings);
  if (!into.result) {
    into.result = base::Refusal{stored.file_name, into.result.refusal().text()};
    return;
  }
  waveform::CaptureAccuracy accuracy;
  if (into.voltage) accuracy.channels.push_back(accuracy_of(source, true));
  if (into.current) accuracy.channels.push_back(accuracy_of(source, false));
  accuracy.occasion = {context.run, context.step + ", capture"};
  into.quote = waveform::quote(*into.result, accuracy);
}

/// The quoted result, or the value alone where nothing is declared of its error.
Quantity quantity_of(const estimate::Quoted& quoted, const base::Outcome<waveform::Bounded>& value) {
  if (!value) return missing("1", value.refusal().text());
  Quantity quantity =
      quoted ? to_quantity(*quoted, "1") : without_uncertainty(value->value, "1", quoted.refusal().text());
  quantity.lower_bound = value->lower_bound;
  return quantity;
}

/// The last capture of a source in the step's window or after it. What came before shows a bench that had not
/// settled yet: told, not used.
const store::StoredCapture* last_capture(const store::StoredRun& run, const setup::CaptureSource& source,
                                         const WindowContext& context, std::vector<std::string>& remarks) {
  const store::StoredCapture* last = nullptr;
  for (const store::StoredCapture& stored : run.captures) {
    if (stored.step != context.step_index || stored.instrument != source.instrument) continue;
    const double early_s = context.from_s - since_start(run, stored.t_ns);
    if (early_s > 0.0) {
      remarks.push_back("capture not used: " + stored.file_name + " came " +
                        base::print_significant(early_s, 3) +
                        " s before the averaging window began, when the step had not settled");
      continue;
    }
    if (last == nullptr || stored.t_ns >= last->t_ns) last = &stored;
  }
  return last;
}

}  // namespace

std::vector<CaptureAnalysis> captures_of(const store::StoredRun& run, const setup::Hookup& hookup,
                                         const setup::Stair& stair, const WindowContext& context,
                                         std::vector<std::string>& remarks) {
  std::vector<CaptureAnalysis> analyses;
  for (const setup::CaptureSource& source : hookup.captures) {
    const store::StoredCapture* last = last_capture(run, source, context, remarks);
    if (last == nullptr) continue;
    CaptureAnalysis analysis;
    analysis.source = &source;
    analysis.port = hookup.find_port(source.port);
    if (last->bytes.empty() && last->size > 0) {
      analysis.result =
          base::Refusal{last->file_name, "the run was loaded without the bytes of its captures"};
    } else {
      analyse(*last, stair, context, analysis);
    }
    if (analysis.result) {
      for (const std::string& remark : analysis.result->remarks) remarks.push_back("capture: " + remark);
    } else {
      remarks.push_back("capture not used: " + analysis.result.refusal().text());
    }
    analyses.push_back(std::move(analysis));
  }
  return analyses;
}

const CaptureAnalysis* capture_of(const std::vector<CaptureAnalysis>& captures, const std::string& port) {
  for (const CaptureAnalysis& capture : captures) {
    if (capture.port != nullptr && capture.port->name == port) return &capture;
  }
  return nullptr;
}

CaptureQuantities quantities_of(const std::vector<CaptureAnalysis>& captures) {
  const CaptureAnalysis* best = nullptr;
  for (const CaptureAnalysis& capture : captures) {
    if (capture.port == nullptr || capture.port->kind != setup::PortKind::ac ||
        capture.source->voltage_column.empty())
      continue;
    const bool better = best == nullptr || (best->port->direction == setup::Direction::input &&
                                            capture.port->direction == setup::Direction::output);
    if (better) best = &capture;
  }
  const auto nothing = [](const std::string& why) {
    return CaptureQuantities{missing("1", why), missing("1", why), missing("Hz", why)};
  };
  if (best == nullptr) return nothing("no capture of an AC voltage in this step");
  if (!best->result) return nothing(best->result.refusal().text());
  const ChannelResult& voltage = best->result->channels[*best->voltage];
  const ChannelQuote& quote = best->quote.channels[*best->voltage];
  const auto thd = voltage.thd_f ? base::Outcome<waveform::Bounded>{waveform::Bounded{*voltage.thd_f, false}}
                                 : base::Outcome<waveform::Bounded>{voltage.thd_f.refusal()};
  CaptureQuantities out{
      quantity_of(quote.thd_f, thd), quantity_of(quote.crest_factor, voltage.crest_factor), {}};
  const auto& fundamental = best->result->fundamental;
  if (best->quote.frequency_hz) {
    out.frequency = to_quantity(*best->quote.frequency_hz, "Hz");
  } else if (fundamental) {
    out.frequency =
        without_uncertainty(fundamental->frequency_hz, "Hz", best->quote.frequency_hz.refusal().text());
  } else {
    out.frequency = missing("Hz", fundamental.refusal().text());
  }
  return out;
}

}  // namespace loadstair::evaluation
