// Coverage intervals: effective degrees of freedom, Student's t, the 95 % interval.
#pragma once

#include "analysis/estimate/estimate.h"

namespace loadstair::estimate {

/// The one coverage level of the program.
inline constexpr double kLevel = 0.95;

enum class CoverageMethod { linear, monte_carlo };

/// A coverage interval, in the unit of the estimate.
struct Coverage {
  double value = 0;
  double low = 0;
  double high = 0;
  double standard_uncertainty = 0;
  double expanded = 0;            ///< U = k u; only for the linear method
  double k = 0;                   ///< coverage factor; only for the linear method
  double degrees_of_freedom = 0;  ///< effective; infinite where no Type A source counts
  double level = kLevel;
  CoverageMethod method = CoverageMethod::linear;
};

/// Welch-Satterthwaite: u^4 / sum(u_i^4 / nu_i), sources of one sample counted together; infinite without
/// Type A. Source: JCGM 100:2008 G.4.1, equation G.2b.
[[nodiscard]] double effective_degrees_of_freedom(const Estimate& a);

/// Two-sided Student quantile t_p(nu): the coverage factor for probability p. nu may be fractional (not
/// truncated) or infinite. Precondition: 0 < p < 1, nu > 0. Source: JCGM 100:2008 G.3.2, table G.2.
[[nodiscard]] double student_t(double p, double degrees_of_freedom);

/// The linear interval value +/- t u. An exact estimate has an interval of no width.
[[nodiscard]] Coverage coverage(const Estimate& a);

}  // namespace loadstair::estimate
