// How an output comes up: rise time, overshoot, settling, monotonic or not, from a sampled record.
#pragma once

#include <optional>
#include <span>
#include <string>
#include <vector>

#include "analysis/efficiency/port.h"

namespace loadstair::efficiency {

/// A magnitude over time, uniformly sampled: a DC voltage, or the envelope of an AC one.
struct Envelope {
  double first_s = 0;     ///< instant of the first value; any origin
  double interval_s = 0;  ///< above zero
  std::vector<double> values;
};

/// RMS over each half cycle that lies wholly within the record, one after the other; the instants are the
/// middles of the half cycles. The direct component counts in it.
/// frequency_hz  of the steady output; at least 20 samples a half cycle
/// Errors:       refused for fewer than two half cycles or 20 samples in one, numbers that are not finite.
[[nodiscard]] base::Outcome<Envelope> half_cycle_rms(std::span<const double> values, double interval_s,
                                                     double frequency_hz);

struct StartUpSettings {
  double band = 0.02;             ///< share of the final value that "settled" means
  double noise_tolerance = 0.01;  ///< a fall during the rise by less than this share of final is noise
  std::optional<double> event_s;  ///< when it was switched on, in the envelope's time; nullopt: not known
  std::string name;               ///< of the record, in keys and refusals
};

/// A record that begins above this share of its final value shows no start.
inline constexpr double kLeastStart = 0.1;
/// The final value is the mean over this last share of the record.
inline constexpr double kTail = 0.2;
/// Fewer samples than this between 10 and 90 % leave the rise time unmeasured. Common practice, no source.
inline constexpr int kLeastOnEdge = 4;

struct StartUp {
  double initial = 0;  ///< mean over the first twentieth before the rise
  double final = 0;
  Quoted rise_time = base::Refusal{};  ///< s, 10 to 90 % of the way from 0 to final
  Quoted overshoot = base::Refusal{};  ///< greatest value less final, share of final; zero or more
  Quoted settling_time =
      base::Refusal{};             ///< s, from the event (else from 10 %) until within the band for good
  Quoted delay = base::Refusal{};  ///< s, from the event to 10 %
  bool monotonic = false;          ///< between 10 and 90 % it never falls by more than the tolerance
  double deepest_fall = 0;         ///< there, share of final
  std::string text;
};

/// Crossings are interpolated between samples; each is known to half an interval (rectangular), and to the
/// noise of the tail over the slope. Overshoot lies between the greatest value and that less the greatest
/// excursion of the tail.
/// Errors:  refused where the record starts high, never settles (the last fifth leaves the band), has no
///          positive final value, fewer than 20 samples, or a number that is not finite.
/// Source:  IEEE Std 181-2011 for the terms (from memory): reference levels 10 and 90 %.
[[nodiscard]] base::Outcome<StartUp> start_up(const Envelope& envelope, const StartUpSettings& settings);

/// Whether a record begins below 10 % of what it ends at: only then start_up() has something to say.
[[nodiscard]] bool shows_a_start(const Envelope& envelope);

}  // namespace loadstair::efficiency
