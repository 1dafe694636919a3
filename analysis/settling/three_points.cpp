#include "analysis/settling/three_points.h"

#include <cmath>

#include "analysis/settling/words.h"

namespace loadstair::settling {

base::Outcome<ThreePointEnd> three_point_end(const estimate::Estimate& first,
                                             const estimate::Estimate& second,
                                             const estimate::Estimate& third, double spacing_s) {
  if (!(spacing_s > 0.0) || !std::isfinite(spacing_s)) {
    return base::Refusal{"three readings", "the time between them must be above zero"};
  }
  const double early = second.value() - first.value();
  const double late = third.value() - second.value();
  // q: what is left of a change after one spacing, exp(-h/tau).
  const double q = late / early;
  if (!(q > 0.0 && q < 1.0)) {
    return base::Refusal{"three readings", "changes of " + value_text(early) + " and then " +
                                               value_text(late) + " are no approach to an end"};
  }
  // end = b + late/(1 - q) = b + early late/(early - late).
  const double r = 1.0 / (early - late);
  const double by_early = -late * late * r * r;
  const double by_late = early * early * r * r;
  ThreePointEnd out;
  out.end = estimate::combine(second.value() + early * late * r,
                              {{first, -by_early}, {second, 1.0 + by_early - by_late}, {third, by_late}});
  const double log_q = std::log(early / late);
  const double tau = spacing_s / log_q;
  // d tau = -tau/log_q (d early/early - d late/late)
  const double scale = -tau / log_q;
  out.tau_s = estimate::combine(
      tau, {{first, -scale / early}, {second, scale * (1.0 / early + 1.0 / late)}, {third, -scale / late}});
  return out;
}

}  // namespace loadstair::settling
