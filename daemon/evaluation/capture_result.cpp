#include "daemon/evaluation/capture_result.h"

#include <cstdint>
#include <numbers>
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
  accuracy.offset = voltage ? source.voltage_offset_v : source.current_offset_a;
  accuracy.bandwidth_hz = voltage ? source.voltage_bandwidth_hz : source.current_bandwidth_hz;
  accuracy.linearity =
      (voltage ? source.voltage_linearity_percent : source.current_linearity_percent) / 100.0;
  // What is declared is the delay and the phase between the two: all of it is given to the current.
  accuracy.delay_s = voltage ? 0.0 : source.delay_tolerance_s;
  accuracy.phase_rad = voltage ? 0.0 : source.phase_tolerance_deg * std::numbers::pi / 180.0;
  return accuracy;
}

/// Adds one column of the file; nullopt when the source names none. Refusal: the file has no such column.
base::Outcome<std::optional<std::size_t>> add_column(const scope_csv::ScopeFile& file,
                                                     const std::string& column, double scale,
                                                     const std::string& unit, double delay_s,
                                                     waveform::Waveform& into) {
  if (column.empty()) return std::optional<std::size_t>{};
  const auto found = scope_csv::find_channel(file, column);
  if (!found) return found.refusal();
  const scope_csv::SampleColumn& samples = file.samples.columns[*found];
  waveform::Channel channel;
  channel.name = column;
  channel.unit = unit;
  channel.values = samples.values;
  channel.scale = scale;
  channel.delay_s = delay_s;
  channel.clipped_high = samples.clipped_high;
  channel.clipped_low = samples.clipped_low;
  into.channels.push_back(std::move(channel));
  return std::optional{into.channels.size() - 1};
}

/// Both columns of a source as voltage and current of one record.
base::Outcome<waveform::Waveform> waveform_of(const scope_csv::ScopeFile& file,
                                              const setup::CaptureSource& source) {
  waveform::Waveform waveform;
  waveform.interval_s = file.samples.interval_s;
  const auto voltage = add_column(file, source.voltage_column, source.voltage_scale, "V", 0.0, waveform);
  if (!voltage) return voltage.refusal();
  const auto current =
      add_column(file, source.current_column, source.current_scale, "A", source.current_delay_s, waveform);
  if (!current) return current.refusal();
  waveform.voltage = *voltage;
  waveform.current = *current;
  return waveform;
}

/// The zero of a source's voltage in a step of that kind: the capture nearest in time to the one that is
/// judged. nullopt: there is none, or it cannot be read (told).
std::optional<waveform::ZeroReading> zero_beside(const store::StoredRun& run, const setup::Stair& stair,
                                                 const setup::CaptureSource& source, std::int64_t t_ns,
                                                 bool before, std::vector<std::string>& remarks) {
  const store::StoredCapture* nearest = nullptr;
  for (const store::StoredCapture& stored : run.captures) {
    const auto step = static_cast<std::size_t>(stored.step);
    const bool zero =
        stored.step >= 0 && step < stair.steps.size() && stair.steps[step].kind == setup::StepKind::zero;
    if (!zero || stored.instrument != source.instrument || (stored.t_ns < t_ns) != before) continue;
    const bool nearer =
        nearest == nullptr || (before ? stored.t_ns > nearest->t_ns : stored.t_ns < nearest->t_ns);
    if (nearer) nearest = &stored;
  }
  if (nearest == nullptr || nearest->bytes.empty()) return std::nullopt;
  const auto refused = [&](const base::Refusal& why) {
    remarks.push_back("zero not used: " + nearest->file_name + ": " + why.text());
    return std::nullopt;
  };
  const auto file = scope_csv::read_scope_csv(nearest->bytes, nearest->file_name);
  if (!file) return refused(file.refusal());
  const auto record = waveform_of(*file, source);
  if (!record) return refused(record.refusal());
  if (!record->voltage) return std::nullopt;
  const auto zero = waveform::zero_of(record->channels[*record->voltage]);
  if (!zero) return refused(zero.refusal());
  return *zero;
}

/// A DC port's ripple over whole cycles of its own, where the record has them: parts of a cycle at the ends
/// would count as ripple power and as scatter. Else over the whole record.
base::Outcome<waveform::WaveformResult> analysed_direct(const waveform::Waveform& record,
                                                        waveform::AnalysisSettings settings) {
  settings.expected = waveform::Expected::either;
  auto by_cycles = waveform::analyse(record, settings);
  if (by_cycles) return by_cycles;
  settings.expected = waveform::Expected::direct;
  return waveform::analyse(record, settings);
}

void analyse(const store::StoredCapture& stored, const setup::Stair& stair, const WindowContext& context,
             CaptureAnalysis& into) {
  const setup::CaptureSource& source = *into.source;
  const auto file = scope_csv::read_scope_csv(stored.bytes, stored.file_name);
  if (!file) {
    into.result = file.refusal();
    return;
  }
  const auto waveform = waveform_of(*file, source);
  if (!waveform) {
    into.result = base::Refusal{stored.file_name, waveform.refusal().text()};
    return;
  }
  into.voltage = waveform->voltage;
  into.current = waveform->current;
  waveform::AnalysisSettings settings;
  settings.harmonics = kHarmonics;
  settings.crest_band_hz = source.crest_band_hz;
  const bool alternating = into.port != nullptr && into.port->kind == setup::PortKind::ac;
  settings.expected = waveform::Expected::alternating;
  if (alternating && into.port->direction == setup::Direction::output &&
      stair.ratings.output_frequency_hz > 0.0) {
    settings.fundamental_hz = stair.ratings.output_frequency_hz;
  }
  into.result = alternating ? waveform::analyse(*waveform, settings) : analysed_direct(*waveform, settings);
  if (!into.result) {
    into.result = base::Refusal{stored.file_name, into.result.refusal().text()};
    return;
  }
  waveform::CaptureAccuracy accuracy;
  if (into.voltage) accuracy.channels.push_back(accuracy_of(source, true));
  if (into.current) accuracy.channels.push_back(accuracy_of(source, false));
  accuracy.occasion = {context.run, context.step + ", capture"};
  accuracy.deskewed = !source.deskewed.empty();
  if (source.timebase_ppm > 0.0) {
    accuracy.timebase = source.timebase_ppm * 1e-6;
    accuracy.timebase_owner = {source.instrument, "time base", ""};
  }
  into.quote = waveform::quote(*into.result, accuracy);
}

/// Of an alternating output's voltage: its direct component against the zeros of this run.
void judge_direct_component(const store::StoredRun& run, const setup::Stair& stair,
                            const store::StoredCapture& stored, const WindowContext& context,
                            CaptureAnalysis& into, std::vector<std::string>& remarks) {
  const bool output = into.port != nullptr && into.port->kind == setup::PortKind::ac &&
                      into.port->direction == setup::Direction::output;
  if (!into.result || !into.voltage || !output) return;
  const waveform::Zeros zeros{zero_beside(run, stair, *into.source, stored.t_ns, true, remarks),
                              zero_beside(run, stair, *into.source, stored.t_ns, false, remarks)};
  into.direct_component =
      waveform::dc_component(into.result->channels[*into.voltage], zeros, accuracy_of(*into.source, true),
                             {context.run, context.step + ", capture"});
}

/// The quoted result, or the value alone where nothing is declared of its error.
Quantity quantity_of(const estimate::Quoted& quoted, const base::Outcome<waveform::Bounded>& value) {
  if (!value) return missing("1", value.refusal().text());
  Quantity quantity =
      quoted ? to_quantity(*quoted, "1") : without_uncertainty(value->value, "1", quoted.refusal().text());
  quantity.lower_bound = value->lower_bound;
  return quantity;
}

Quantity thd_of(const ChannelResult& channel, const ChannelQuote& quote) {
  const auto value = channel.thd_f
                         ? base::Outcome<waveform::Bounded>{waveform::Bounded{*channel.thd_f, false}}
                         : base::Outcome<waveform::Bounded>{channel.thd_f.refusal()};
  return quantity_of(quote.thd_f, value);
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
      judge_direct_component(run, stair, *last, context, analysis, remarks);
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
    return CaptureQuantities{missing("1", why), missing("1", why), missing("Hz", why), missing("1", why),
                             missing("V", why)};
  };
  if (best == nullptr) return nothing("no capture of an AC voltage in this step");
  if (!best->result) return nothing(best->result.refusal().text());
  const ChannelResult& voltage = best->result->channels[*best->voltage];
  const ChannelQuote& quote = best->quote.channels[*best->voltage];
  CaptureQuantities out;
  out.thd_voltage = thd_of(voltage, quote);
  // In the declared band where there is one: raw peaks go with the scope's bandwidth and noise.
  const bool in_band = best->source->crest_band_hz.has_value();
  out.crest_factor = in_band ? quantity_of(quote.crest_factor_in_band, voltage.crest_factor_in_band)
                             : quantity_of(quote.crest_factor, voltage.crest_factor);
  out.thd_current = best->current
                        ? thd_of(best->result->channels[*best->current], best->quote.channels[*best->current])
                        : missing("1", "the capture has no current");
  out.dc_component = best->direct_component ? to_quantity(best->direct_component->value, "V")
                                            : missing("V", best->direct_component.refusal().text());
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
