// A step's captures, analysed as their source in the hook-up file says. Of this room only.
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "analysis/waveform/dc_component.h"
#include "analysis/waveform/quote.h"
#include "daemon/evaluation/channel_value.h"
#include "daemon/evaluation/result.h"
#include "daemon/setup/stair.h"

namespace loadstair::evaluation {

/// One capture of a port.
struct CaptureAnalysis {
  const setup::CaptureSource* source = nullptr;
  const setup::Port* port = nullptr;
  base::Outcome<waveform::WaveformResult> result = base::Refusal{};
  waveform::WaveformQuote quote;
  std::optional<std::size_t> voltage, current;  ///< channel of the result
  /// Of an alternating output's voltage, against captures at zero steps before and after in the same run.
  base::Outcome<waveform::DcComponent> direct_component =
      base::Refusal{"", "only the direct component of an AC output's voltage is judged"};
};

/// The last capture of every source in this step, of those that came after its averaging window began; a
/// refused result says what is wrong with the file or its samples.
/// remarks   what is to be told of files that came too early or say less than they should
[[nodiscard]] std::vector<CaptureAnalysis> captures_of(const store::StoredRun& run,
                                                       const setup::Hookup& hookup, const setup::Stair& stair,
                                                       const WindowContext& context,
                                                       std::vector<std::string>& remarks);

/// The capture of a port; nullptr when the step has none.
[[nodiscard]] const CaptureAnalysis* capture_of(const std::vector<CaptureAnalysis>& captures,
                                                const std::string& port);

/// Distortion, crest factor (in the declared band where there is one) and direct component of the output's
/// voltage, its frequency, and the distortion of its current.
struct CaptureQuantities {
  Quantity thd_voltage, crest_factor, frequency, thd_current, dc_component;
};
[[nodiscard]] CaptureQuantities quantities_of(const std::vector<CaptureAnalysis>& captures);

}  // namespace loadstair::evaluation
