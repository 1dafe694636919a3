#include "analysis/waveform/waveform.h"

#include <algorithm>
#include <cmath>
#include <string>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/waveform/channel.h"
#include "analysis/waveform/fundamental.h"
#include "analysis/waveform/power.h"

namespace loadstair::waveform {
namespace {

using base::Outcome;
using base::Refusal;

constexpr std::size_t kLeastSamples = 16;
constexpr double kLeastSamplesPerCycle = 8.0;
constexpr double kLeastInterval_s = 1e-15;
constexpr double kMostInterval_s = 1e6;

std::string count_text(std::size_t count) {
  return base::print_integer(static_cast<std::int64_t>(count));
}

std::optional<Refusal> unfit(const Waveform& waveform, const AnalysisSettings& settings) {
  if (waveform.channels.empty()) return Refusal{"record", "it has no channel"};
  if (!(waveform.interval_s > 0.0) || !std::isfinite(waveform.interval_s)) {
    return Refusal{"record", "the sample interval must be above zero"};
  }
  if (waveform.interval_s < kLeastInterval_s || waveform.interval_s > kMostInterval_s) {
    return Refusal{"record", "a sample interval of " + base::print_significant(waveform.interval_s, 3) +
                                 " s is none that a scope has: check its unit"};
  }
  const std::size_t count = waveform.channels.front().values.size();
  if (count < kLeastSamples) {
    return Refusal{"record",
                   count_text(count) + " samples are too few; " + count_text(kLeastSamples) + " are needed"};
  }
  for (const Channel& channel : waveform.channels) {
    if (channel.values.size() != count) {
      return Refusal{"channel " + channel.name, count_text(channel.values.size()) + " samples, but " +
                                                    count_text(count) + " in channel " +
                                                    waveform.channels.front().name};
    }
  }
  for (const auto& named : {waveform.voltage, waveform.current}) {
    if (named && *named >= waveform.channels.size())
      return Refusal{"record", "the named voltage or current is not there"};
  }
  if (settings.harmonics < 1 || settings.harmonics > 500)
    return Refusal{"settings", "harmonics must be 1 to 500"};
  if (settings.least_cycles < 1) return Refusal{"settings", "at least one whole cycle is needed"};
  if (settings.fundamental_hz && !(*settings.fundamental_hz > 0.0)) {
    return Refusal{"settings", "the fundamental must be above zero"};
  }
  return std::nullopt;
}

/// The fundamental of the voltage when named, else of the channel where it stands out most.
/// Its channel goes into `reference`.
Outcome<FoundFundamental> common_fundamental(const Waveform& waveform, const std::vector<Prepared>& prepared,
                                             const AnalysisSettings& settings, std::size_t& reference) {
  double low = 0.0;
  double high = 0.5;
  if (settings.fundamental_hz) {
    low = 0.8 * *settings.fundamental_hz * waveform.interval_s;
    high = 1.2 * *settings.fundamental_hz * waveform.interval_s;
  }
  if (waveform.voltage) {
    Outcome<FoundFundamental> found = find_fundamental(prepared[*waveform.voltage], low, high);
    reference = *waveform.voltage;
    if (found) return found;
  }
  Outcome<FoundFundamental> best = Refusal{"record", "no fundamental: no channel alternates"};
  for (std::size_t c = 0; c < prepared.size(); ++c) {
    Outcome<FoundFundamental> found = find_fundamental(prepared[c], low, high);
    if (!found || (best && found->share <= best->share)) continue;
    best = std::move(found);
    reference = c;
  }
  return best;
}

Refusal too_few(double cycles, double frequency_hz, int least) {
  return {"record", base::print_fixed(cycles, 2) + " cycles of " + base::print_significant(frequency_hz, 4) +
                        " Hz are too few; record " + base::print_integer(least) + " whole cycles, " +
                        base::print_significant(least / frequency_hz, 3) + " s"};
}

/// A line of less than the least cycles in a record that is mostly its mean is drift, not a fundamental.
bool is_drift(const Prepared& channel) {
  double sum = 0.0;
  double square = 0.0;
  for (std::size_t k = 0; k < channel.size(); ++k) {
    sum += channel[k];
    square += channel[k] * channel[k];
  }
  const double mean_square = sum * sum / static_cast<double>(channel.size());
  return 2.0 * mean_square > square;
}

/// The window, or a direct one (cycles = 0), or a refusal. reference: the channel whose fundamental it is.
Outcome<CycleWindow> choose_window(const Waveform& waveform, const std::vector<Prepared>& prepared,
                                   const AnalysisSettings& settings, WaveformResult& result,
                                   std::size_t& reference) {
  CycleWindow direct;
  direct.span = SpanSum::whole_samples(0, prepared.front().size());
  if (settings.expected == Expected::direct) {
    result.fundamental = Refusal{"record", "no fundamental: taken as direct"};
    return direct;
  }
  const Outcome<FoundFundamental> found = common_fundamental(waveform, prepared, settings, reference);
  if (!found) {
    if (settings.expected == Expected::alternating) return found.refusal();
    result.fundamental = found.refusal();
    return direct;
  }
  const double frequency_hz = found->frequency / waveform.interval_s;
  const CycleWindow window = whole_cycles(*found, prepared.front().size());
  const double cycles = found->frequency * static_cast<double>(prepared.front().size());
  if (window.cycles < settings.least_cycles) {
    const Prepared& channel = prepared[waveform.voltage.value_or(0)];
    if (settings.expected == Expected::either && is_drift(channel)) {
      result.fundamental = Refusal{"record", "no fundamental: the record drifts slowly about its mean"};
      return direct;
    }
    return too_few(cycles, frequency_hz, settings.least_cycles);
  }
  if (window.period < kLeastSamplesPerCycle) {
    return Refusal{"record", base::print_fixed(window.period, 1) + " samples a cycle of " +
                                 base::print_significant(frequency_hz, 4) + " Hz are too few; sample at " +
                                 base::print_significant(kLeastSamplesPerCycle * frequency_hz, 3) +
                                 " Hz or faster"};
  }
  result.fundamental = Fundamental{1.0 / (window.period * waveform.interval_s), frequency_hz,
                                   found->standard_uncertainty / waveform.interval_s};
  return window;
}

void add_remarks(WaveformResult& result, const std::vector<Prepared>& prepared, const CycleWindow& window,
                 const AnalysisSettings& settings) {
  for (std::size_t c = 0; c < prepared.size(); ++c) {
    const std::string channel = "channel " + result.channels[c].name + ": ";
    if (prepared[c].clipped > 0) {
      result.remarks.push_back(channel + count_text(prepared[c].clipped) +
                               " samples clipped; peak, crest factor and RMS are lower bounds, "
                               "and harmonics, distortion and powers are not to be used");
    }
    if (prepared[c].blank > 0) {
      result.remarks.push_back(channel + count_text(prepared[c].blank) +
                               " blank samples lie on the line between their neighbours");
    }
  }
  if (window.cycles == 0) return;
  const auto orders = static_cast<int>(result.channels.front().harmonics.size());
  if (orders < settings.harmonics) {
    result.remarks.push_back("sampling resolves orders up to " + base::print_integer(orders) + " of " +
                             base::print_integer(settings.harmonics) + " asked for");
  }
}

}  // namespace

base::Outcome<WaveformResult> analyse(const Waveform& waveform, const AnalysisSettings& settings) {
  if (const auto reason = unfit(waveform, settings)) return *reason;
  std::vector<Prepared> prepared;
  for (const Channel& channel : waveform.channels) {
    Outcome<Prepared> ready = prepare(channel);
    if (!ready) return ready.refusal();
    prepared.push_back(std::move(ready).value());
  }
  WaveformResult result;
  result.samples = prepared.front().size();
  result.interval_s = waveform.interval_s;
  result.voltage = waveform.voltage;
  result.current = waveform.current;
  std::size_t reference = 0;
  const Outcome<CycleWindow> chosen = choose_window(waveform, prepared, settings, result, reference);
  if (!chosen) return chosen.refusal();
  const CycleWindow& window = chosen.value();
  Outcome<std::vector<GroupWindow>> windows = Refusal{"grouping", "no fundamental"};
  if (window.cycles > 0) windows = group_windows(prepared[reference], window, waveform.interval_s);
  result.window = {window.span.begin, window.span.length(), window.cycles, window.coherent};
  std::vector<ChannelAnalysis> analyses;
  for (std::size_t c = 0; c < prepared.size(); ++c) {
    analyses.push_back(
        analyse_channel(waveform.channels[c], prepared[c], window, windows, waveform.interval_s, settings));
  }
  result.power = Refusal{"power", "no voltage and current are named"};
  if (waveform.voltage && waveform.current) {
    const std::size_t v = *waveform.voltage;
    const std::size_t i = *waveform.current;
    const double frequency_hz = window.cycles > 0 ? 1.0 / (window.period * waveform.interval_s) : 0.0;
    result.power = powers(prepared[v], prepared[i], analyses[v], analyses[i], window,
                          waveform.channels[v].delay_s - waveform.channels[i].delay_s, frequency_hz);
  }
  for (ChannelAnalysis& analysis : analyses) result.channels.push_back(std::move(analysis.result));
  add_remarks(result, prepared, window, settings);
  return result;
}

}  // namespace loadstair::waveform
