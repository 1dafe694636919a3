// Conversion of single readings, and "is it settled yet?", as functions of what has been read so far.
#pragma once

#include <optional>
#include <span>
#include <string>

#include "analysis/base/outcome.h"
#include "analysis/series/time_series.h"
#include "daemon/setup/hookup.h"
#include "daemon/setup/stair.h"
#include "drivers/instrument/reading.h"

namespace loadstair::evaluation {

/// From what an instrument said to the channel's quantity: value * scale, then shunt or thermometer.
/// raw            in the unit that the profile declares
/// cold_junction_degc   of a thermocouple channel that names one; without it such a channel is refused
/// Returns: in channel.unit. Refusal (place: the channel's name): not a number, beyond the sensor's range.
[[nodiscard]] base::Outcome<double> convert(const setup::Channel& channel, double raw,
                                            std::optional<double> cold_junction_degc = std::nullopt);
/// The same for a reading; refused too when its flags forbid the use (kUnusable), in words.
[[nodiscard]] base::Outcome<double> convert(const setup::Channel& channel, const instrument::Reading& reading,
                                            std::optional<double> cold_junction_degc = std::nullopt);

/// What the sequencer looks at: converted good readings, oldest first, times in s of one origin.
struct LiveTraces {
  series::TimeSeries electrical;  ///< step.electrical->channel, at least its last window
  series::TimeSeries thermal;     ///< step.thermal->channel, since the step's set point was applied
  series::TimeSeries ambient;     ///< of the thermal channel's ambient; empty: none
  double electrical_floor = 0.0;  ///< level below which the slope's percentage is taken of this instead; > 0
                                  ///< where the level may be zero (see electrical_floor())
};

/// 1 % of the channel's largest declared range; the unit's 1 % where none is declared.
[[nodiscard]] double electrical_floor(const setup::Channel& channel);

/// How far a step is from being settled.
struct WindowState {
  bool settled = false;  ///< every criterion that the step has is met
  std::string by;        ///< when settled: "slope", "rate", "prediction", "no criterion"
  std::string text;      ///< "settled by rate", or "waits for heatsink: changes 0.8 K in 1.5 s, wanted 0.4 K"
  std::string waits_for;              ///< channel; empty when settled
  std::optional<double> remaining_s;  ///< estimated, 0 when settled; nullopt: cannot be said
  bool electrical_settled = false, thermal_settled = false;
  struct End {
    double value = 0.0, low = 0.0, high = 0.0;
    bool predicted = false;
  };
  std::optional<End> thermal_end;  ///< where the temperature ends, as far as can be said
};

/// The step's criteria on what has been read until now. Cheap enough for twice a second (the exponential fits
/// take well under 2 ms for some thousand readings). `ambient` is read off at the instants of `thermal`.
/// at_last_step   the last step of a run goes on to the rate criterion: its prediction never ends it
[[nodiscard]] WindowState live_window(const setup::Step& step, const LiveTraces& traces,
                                      bool at_last_step = false);

}  // namespace loadstair::evaluation
