// The rehearsed scope: the plant's waveform with a scope's errors, as the text of a CSV file.
#pragma once

#include <cstdint>
#include <string>
#include <vector>

#include "drivers/rehearsal/history.h"

namespace loadstair::rehearsal {

enum class ScopeSignal { output_voltage, output_current, input_voltage, input_current };

struct ScopeChannel {
  std::string name = "V_out";
  std::string unit = "V";
  ScopeSignal signal = ScopeSignal::output_voltage;
  double full_scale = 400.0;    ///< the screen reaches from minus to plus this; beyond: clipped
  double gain_percent = 1.0;    ///< declared, of reading; the true one is drawn inside
  double offset_percent = 0.5;  ///< declared, of full scale
  double noise_percent = 0.05;  ///< standard deviation, of full scale
  double delay_s = 0.0;         ///< declared +-, the true one is drawn inside
};

struct ScopeDescription {
  std::string folder;              ///< where the files drop; empty: captures are refused
  std::string prefix = "capture";  ///< capture_0001.csv, ...
  double interval_s = 1e-5;
  double length_s = 0.24;
  int bits = 12;  ///< 8 to 16
  char separator = ',';
  char decimal_mark = '.';
  std::vector<ScopeChannel> channels;
};

/// The true waveform, `count` samples from `start_s` on, from the phasors of the steps the history keeps.
[[nodiscard]] std::vector<double> draw_wave(const History& history, const PlantParameters& parameters,
                                            ScopeSignal signal, double start_s, double interval_s,
                                            std::size_t count);

/// What the scope makes of it: delay, gain, offset, noise, clipping at full scale, quantisation.
/// `errors_seed` fixes the scope's errors, `capture` the noise.
[[nodiscard]] std::vector<double> digitise(const History& history, const PlantParameters& parameters,
                                           const ScopeDescription& scope, std::size_t channel, double start_s,
                                           std::uint64_t errors_seed, std::uint64_t capture);

/// Header row, unit row, then time and the channels in scientific notation.
[[nodiscard]] std::string capture_csv(const History& history, const PlantParameters& parameters,
                                      const ScopeDescription& scope, double start_s,
                                      std::uint64_t errors_seed, std::uint64_t capture);

}  // namespace loadstair::rehearsal
