// What follows from where a temperature ends: thermal resistance, the case at the highest ambient, and loss
// and efficiency moved to the end temperature. Not for finding the end itself (settling.h).
#pragma once

#include <cstddef>
#include <span>
#include <string>

#include "analysis/base/outcome.h"
#include "analysis/estimate/estimate.h"

namespace loadstair::settling {

/// (end - ambient) / loss, K/W. Errors that both thermometers share cancel through their sources.
/// end_c, ambient_c   degC
/// loss_w             W
/// Refused where the loss is not above zero, or its 95 % interval reaches zero: the quotient has no interval
/// then. Source: the definition of thermal resistance; JCGM 100:2008 5.1 for the uncertainty.
[[nodiscard]] estimate::Quoted thermal_resistance(const estimate::Estimate& end_c,
                                                  const estimate::Estimate& ambient_c,
                                                  const estimate::Estimate& loss_w);

/// The end temperature in a hotter room: end + (highest - ambient), degC. Loss and thermal resistance are
/// taken as they were; that both change with temperature is neglected, and kNeglected says so beside the
/// number. highest_ambient_c  a setting, exact Refused where the highest ambient is not finite.
[[nodiscard]] estimate::Quoted at_highest_ambient(const estimate::Estimate& end_c,
                                                  const estimate::Estimate& ambient_c,
                                                  double highest_ambient_c);
inline constexpr const char* kNeglected = "the same loss and thermal resistance assumed in the hotter room";

/// How the loss went with temperature over a soak.
struct LossSlope {
  double slope_w_per_k = 0.0;
  double slope_u_w_per_k = 0.0;     ///< Type A, with the correlation of the residuals in time
  double degrees_of_freedom = 0.0;  ///< N_eff - 2, at least 1
  double half_width_w_per_k = 0.0;  ///< Student's t times u: the 95 % interval is slope +/- this
  double temperature_span_k = 0.0;  ///< greatest less least temperature of the line's readings
  std::size_t count = 0;
  bool resolved = false;  ///< the 95 % interval does not contain zero
  std::string why;        ///< not resolved: why; empty otherwise
};

/// Ordinary line of loss against temperature.
/// temperature_c, loss_w   at common instants, oldest first, as many as each other, finite
/// The noise of the temperature flattens the line by its share of the variance; from 2 % on (common practice,
/// no source) the slope counts as not resolved.
/// Refused: spans of unequal length, fewer than 10 readings, numbers that are not finite, a temperature that
/// never moved. Source: JCGM 100:2008 H.3; Geyer 1992 for the correlation.
[[nodiscard]] base::Outcome<LossSlope> loss_with_temperature(std::span<const double> temperature_c,
                                                             std::span<const double> loss_w);

/// What was measured in the averaging window, and where it goes.
struct AtEnd {
  estimate::Estimate input_w, loss_w, efficiency;  ///< as measured; efficiency a ratio
  estimate::Estimate remaining_k;  ///< end temperature less the window's, with its uncertainty
  std::string run, step;           ///< parts of the sources' keys
};

/// Loss and efficiency at the end temperature. The output power is taken as held: the input rises with the
/// loss.
struct LossAtEnd {
  bool projected = false;       ///< along the line; false: between the ends of the slope's interval
  estimate::Estimate change_w;  ///< of the loss, from the window to the end
  estimate::Estimate loss_w, efficiency;
  std::string text;  ///< for a person: the change and how it was had
};

/// Resolved slope: change = slope x remaining rise, each with its uncertainty. Not resolved: the change lies
/// somewhere between the ends of the slope's interval times the remaining rise, which is not symmetric about
/// the measured loss: the middle is added, rectangular (JCGM 100:2008 4.3.8). Efficiency: eta P_in / (P_in +
/// change), the sources of eta and of the change kept. Refused where the remaining rise is larger than the
/// soak has shown (the line is not extrapolated farther than it was seen), and where the input power is not
/// above zero.
[[nodiscard]] base::Outcome<LossAtEnd> project_loss(const LossSlope& slope, const AtEnd& measured);

}  // namespace loadstair::settling
