#include "analysis/efficiency/regulation.h"

#include <algorithm>
#include <cmath>

namespace loadstair::efficiency {
namespace {

/// (V at the least setting - V at the greatest) times sign, over nominal.
base::Outcome<Regulation> regulation(std::span<const RegulationPoint> points, double nominal_v, double sign,
                                     const std::string& what, const std::string& settings) {
  const auto finite = [](const RegulationPoint& point) {
    return std::isfinite(point.at) && std::isfinite(point.output_voltage.value()) &&
           std::isfinite(point.output_voltage.variance());
  };
  if (!(nominal_v > 0) || !std::isfinite(nominal_v)) {
    return base::Refusal{what, "no nominal output voltage is known to relate it to"};
  }
  if (!std::all_of(points.begin(), points.end(), finite)) {
    return base::Refusal{what, "a level has a number that is not finite"};
  }
  const std::string few = "fewer than two " + settings + " were measured";
  if (points.size() < 2) return base::Refusal{what, few};
  const auto by_setting = [](const RegulationPoint& a, const RegulationPoint& b) { return a.at < b.at; };
  const auto by_voltage = [](const RegulationPoint& a, const RegulationPoint& b) {
    return a.output_voltage.value() < b.output_voltage.value();
  };
  const auto [least, greatest] = std::minmax_element(points.begin(), points.end(), by_setting);
  const double largest = std::max(std::abs(least->at), std::abs(greatest->at));
  if (!(greatest->at - least->at > kSameSetting * largest)) return base::Refusal{what, few};
  const auto [lowest, highest] = std::minmax_element(points.begin(), points.end(), by_voltage);
  Regulation out;
  out.value = (least->output_voltage - greatest->output_voltage) * (sign / nominal_v);
  out.least = least->label;
  out.greatest = greatest->label;
  out.from = least->at;
  out.to = greatest->at;
  out.widest = (highest->output_voltage.value() - lowest->output_voltage.value()) / nominal_v;
  if (!std::isfinite(out.value.value()) || !std::isfinite(out.value.variance())) {
    return base::Refusal{what, "it is beyond what a number holds"};
  }
  return out;
}

}  // namespace

base::Outcome<Regulation> load_regulation(std::span<const RegulationPoint> points, double nominal_v) {
  return regulation(points, nominal_v, 1, "load regulation", "different loads");
}

base::Outcome<Regulation> line_regulation(std::span<const RegulationPoint> points, double nominal_v) {
  return regulation(points, nominal_v, -1, "line regulation", "different input voltages");
}

}  // namespace loadstair::efficiency
