#include "analysis/estimate/distribution_function.h"

#include <gsl/gsl_cdf.h>

#include "analysis/base/require.h"

namespace loadstair::estimate {

double student_below(double x, double degrees_of_freedom) {
  base::require(degrees_of_freedom > 0, "degrees of freedom are above zero");
  // Beyond this the two agree to double's precision.
  constexpr double kNormalFrom = 1e10;
  return degrees_of_freedom > kNormalFrom ? gsl_cdf_ugaussian_P(x) : gsl_cdf_tdist_P(x, degrees_of_freedom);
}

}  // namespace loadstair::estimate
