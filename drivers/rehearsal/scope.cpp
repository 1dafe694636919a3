#include "drivers/rehearsal/scope.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "analysis/base/number.h"
#include "drivers/rehearsal/draws.h"

namespace loadstair::rehearsal {

namespace {

constexpr double kTwoPi = 2.0 * std::numbers::pi;

/// One sine of a waveform; the phasors of a step give its amplitude.
struct Sine {
  double amplitude;
  double rate;  // radians a second
  double phase;
};

/// The sines and the mean of one signal within one step.
struct Lines {
  double mean = 0.0;
  std::vector<Sine> sines;
};

void add_residue(Lines& lines, double rms, const ConverterParameters& converter, double rate) {
  if (converter.kind == ConverterKind::dcdc) {
    lines.sines.push_back({std::numbers::sqrt2 * rms, kTwoPi * converter.output.residue_frequency_hz, 0.0});
    return;
  }
  // Two sidebands of the switching frequency, as a modulated bridge leaves them.
  for (const int side : {-1, 1})
    lines.sines.push_back({rms, rate * static_cast<double>(converter.output.residue_ratio + side), 0.0});
}

Lines output_lines(const WaveStep& wave, const PlantParameters& p, bool voltage) {
  const double rate = kTwoPi * p.converter.output.frequency_hz;
  const std::complex<double> main = voltage ? wave.voltage_v : wave.current_a;
  Lines lines;
  lines.mean = voltage ? wave.voltage_dc_v : wave.current_dc_a;
  const auto add = [&](int order, double rms, double phase) {
    lines.sines.push_back({std::numbers::sqrt2 * rms, rate * order, phase});
  };
  if (p.converter.kind == ConverterKind::inverter) {
    add(1, std::abs(main), std::arg(main));
    const double scale = std::abs(wave.voltage_v) * (voltage ? 1.0 : wave.conductance_s);
    for (const Line& line : p.converter.output.harmonics)
      add(line.order, scale * line.share, line.phase_deg * std::numbers::pi / 180.0);
    // The terminals' voltage is the converter's; what the load draws on its own shows in the current alone.
    if (!voltage)
      for (const Line& line : p.load.harmonics)
        add(line.order, wave.own_current_a * line.share, line.phase_deg * std::numbers::pi / 180.0);
  }
  add_residue(lines, wave.residue_v * (voltage ? 1.0 : wave.conductance_s), p.converter, rate);
  return lines;
}

Lines input_lines(const WaveStep& wave, const PlantParameters& p, bool voltage) {
  // The power of a single phase swings as -cos(2wt): so does the current, and the voltage the other way.
  const double rate = 2.0 * kTwoPi * p.converter.output.frequency_hz;
  const double amplitude = voltage ? wave.input_ripple_a * wave.input_ripple_ohm : -wave.input_ripple_a;
  return {voltage ? wave.input_voltage_v : wave.input_current_a, {{amplitude, rate, 0.5 * std::numbers::pi}}};
}

Lines lines_of(const WaveStep& wave, const PlantParameters& p, ScopeSignal signal) {
  switch (signal) {
    case ScopeSignal::output_voltage:
      return output_lines(wave, p, true);
    case ScopeSignal::output_current:
      return output_lines(wave, p, false);
    case ScopeSignal::input_voltage:
      return input_lines(wave, p, true);
    case ScopeSignal::input_current:
      return input_lines(wave, p, false);
  }
  return {};
}

std::string number_text(double value, int decimals, char mark) {
  std::string text = base::print_scientific(value, decimals);
  if (mark != '.') std::replace(text.begin(), text.end(), '.', mark);
  return text;
}

}  // namespace

std::vector<double> draw_wave(const History& history, const PlantParameters& parameters, ScopeSignal signal,
                              double start_s, double interval_s, std::size_t count) {
  std::vector<double> samples(count);
  if (history.steps() == 0) return samples;
  const PlantStep* drawn = nullptr;
  Lines lines;
  for (std::size_t i = 0; i < count; ++i) {
    const double time_s = start_s + static_cast<double>(i) * interval_s;
    const PlantStep& step = history.at(time_s);
    if (&step != drawn) {
      drawn = &step;
      lines = lines_of(step.wave, parameters, signal);
    }
    double value = lines.mean;
    for (const Sine& sine : lines.sines) value += sine.amplitude * std::sin(sine.rate * time_s + sine.phase);
    samples[i] = value;
  }
  return samples;
}

std::vector<double> digitise(const History& history, const PlantParameters& parameters,
                             const ScopeDescription& scope, std::size_t channel, double start_s,
                             std::uint64_t errors_seed, std::uint64_t capture) {
  const ScopeChannel& c = scope.channels[channel];
  const auto count = static_cast<std::size_t>(std::llround(scope.length_s / scope.interval_s));
  const auto drawn = [&](const char* what) { return symmetric_draw(key_of(errors_seed, what, {channel})); };
  const double gain = 1.0 + 0.01 * c.gain_percent * drawn("scope gain");
  const double offset = 0.01 * c.offset_percent * c.full_scale * drawn("scope offset");
  const double delay_s = c.delay_s * drawn("scope delay");
  std::vector<double> samples =
      draw_wave(history, parameters, c.signal, start_s - delay_s, scope.interval_s, count);
  Pcg32 noise{key_of(errors_seed, "scope noise", {channel, capture}), channel};
  const double code = 2.0 * c.full_scale / std::exp2(scope.bits);
  for (double& sample : samples) {
    const double seen = gain * sample + offset + 0.01 * c.noise_percent * c.full_scale * noise.normal();
    sample = std::clamp(std::round(seen / code) * code, -c.full_scale, c.full_scale - code);
  }
  return samples;
}

std::string capture_csv(const History& history, const PlantParameters& parameters,
                        const ScopeDescription& scope, double start_s, std::uint64_t errors_seed,
                        std::uint64_t capture) {
  std::vector<std::vector<double>> columns;
  std::string text = "Time";
  std::string units = "(s)";
  for (std::size_t c = 0; c < scope.channels.size(); ++c) {
    columns.push_back(digitise(history, parameters, scope, c, start_s, errors_seed, capture));
    text += scope.separator + scope.channels[c].name;
    units += std::string{scope.separator} + "(" + scope.channels[c].unit + ")";
  }
  text += "\n" + units + "\n";
  const std::size_t rows = columns.empty() ? 0 : columns.front().size();
  text.reserve(text.size() + rows * (columns.size() + 1) * 15);
  for (std::size_t i = 0; i < rows; ++i) {
    text += number_text(static_cast<double>(i) * scope.interval_s, 8, scope.decimal_mark);
    for (const std::vector<double>& column : columns) {
      text += scope.separator;
      text += number_text(column[i], 6, scope.decimal_mark);
    }
    text += '\n';
  }
  return text;
}

}  // namespace loadstair::rehearsal
