#include "analysis/estimate/coverage.h"

#include <gsl/gsl_cdf.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <string_view>
#include <vector>

#include "analysis/base/require.h"

namespace loadstair::estimate {

namespace {

/// Beyond this Student's t and the normal distribution agree to double's precision.
constexpr double kNormalFrom = 1e10;

struct Sample {
  std::string_view name;
  double variance = 0;  // as a share of the whole
  double degrees_of_freedom = 0;
};

}  // namespace

double effective_degrees_of_freedom(const Estimate& a) {
  // Shares of the variance rather than variances: fourth powers of small numbers vanish.
  const double total = a.variance();
  if (!(total > 0)) return std::numeric_limits<double>::infinity();
  std::vector<Sample> samples;
  double sum = 0;
  for (const Term& term : a.terms()) {
    const Source& source = *term.source;
    if (!std::isfinite(source.degrees_of_freedom)) continue;
    const double variance = term.contribution * term.contribution / total;
    if (source.sample.empty()) {
      sum += variance * variance / source.degrees_of_freedom;
      continue;
    }
    Sample* found = nullptr;
    for (Sample& sample : samples) {
      if (sample.name == source.sample) found = &sample;
    }
    if (found == nullptr) {
      samples.push_back({source.sample, variance, source.degrees_of_freedom});
    } else {
      found->variance += variance;
      found->degrees_of_freedom = std::min(found->degrees_of_freedom, source.degrees_of_freedom);
    }
  }
  for (const Sample& sample : samples) sum += sample.variance * sample.variance / sample.degrees_of_freedom;
  if (!(sum > 0)) return std::numeric_limits<double>::infinity();
  return 1 / sum;
}

double student_t(double p, double degrees_of_freedom) {
  base::require(p > 0 && p < 1 && degrees_of_freedom > 0,
                "a coverage probability and degrees of freedom are positive");
  const double upper_tail = (1 - p) / 2;
  if (degrees_of_freedom > kNormalFrom) return gsl_cdf_ugaussian_Qinv(upper_tail);
  return gsl_cdf_tdist_Qinv(upper_tail, degrees_of_freedom);
}

Coverage coverage(const Estimate& a) {
  Coverage out;
  out.value = a.value();
  out.standard_uncertainty = a.standard_uncertainty();
  out.degrees_of_freedom = effective_degrees_of_freedom(a);
  out.k = student_t(kLevel, out.degrees_of_freedom);
  out.expanded = out.k * out.standard_uncertainty;
  out.low = out.value - out.expanded;
  out.high = out.value + out.expanded;
  return out;
}

}  // namespace loadstair::estimate
