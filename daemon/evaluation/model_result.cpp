#include "daemon/evaluation/model_result.h"

#include <algorithm>
#include <cmath>

namespace loadstair::evaluation {
namespace {

/// Where no resolution is known, no level is weighted as if its loss were known better than this share of its
/// power.
constexpr double kLeastShare = 1e-6;

}  // namespace

double floor_of(const std::vector<efficiency::CurvePoint>& points) {
  double floor_w = 0.0;
  double largest_w = 0.0;
  for (const efficiency::CurvePoint& point : points) {
    double variance = 0.0;
    for (const estimate::Term& term : point.loss.terms()) {
      if (term.source->resolution) variance += term.contribution * term.contribution;
    }
    floor_w = std::max(floor_w, std::sqrt(variance));
    largest_w = std::max(largest_w, std::abs(point.input_power.value()));
  }
  return std::max(floor_w, kLeastShare * largest_w);
}

}  // namespace loadstair::evaluation
