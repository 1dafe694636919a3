#include "whole/coverage.h"

#include <algorithm>
#include <cmath>

namespace loadstair::whole {
namespace {

/// Relative standard uncertainty of a channel at `value` (after conversion), from its declared figures. A
/// zero check takes the place of the specified offset; what is left of it is half a digit.
double relative_uncertainty(const setup::Channel& channel, double value, const setup::Stair& stair) {
  const auto& zeros = stair.zero_channels;
  const bool zeroed = std::find(zeros.begin(), zeros.end(), channel.name) != zeros.end();
  double raw = value / channel.conversion.scale;
  double variance = 0.0;
  if (channel.conversion.shunt) {
    raw *= channel.conversion.shunt->resistance_ohm;
    variance += std::pow(channel.conversion.shunt->tolerance_percent / 100.0, 2) / 3.0;
  }
  for (const auto& range : channel.ranges) {
    if (range.upto < raw) continue;
    const double gain = range.reading_percent / 100.0;
    const double specified = range.range_percent / 100.0 * range.upto + range.digits * range.resolution;
    const double offset = (zeroed ? range.resolution / 2.0 : specified) / raw;
    variance += (gain * gain + offset * offset) / 3.0;
    break;
  }
  return std::sqrt(variance);
}

}  // namespace

double implied_half_width(const setup::Hookup& hookup, const setup::Stair& stair,
                          const rehearsal::Truth& truth) {
  double variance = 0.0;
  for (const auto& port : hookup.ports) {
    if (port.direction == setup::Direction::output) {
      variance +=
          std::pow(relative_uncertainty(*hookup.find_channel(port.power), truth.output_power_w, stair), 2);
      continue;
    }
    const double volts = hookup.rehearsal->source.at("voltage_v");
    variance += std::pow(relative_uncertainty(*hookup.find_channel(port.voltage), volts, stair), 2);
    variance += std::pow(
        relative_uncertainty(*hookup.find_channel(port.current), truth.input_power_w / volts, stair), 2);
  }
  return 1.96 * truth.efficiency * std::sqrt(variance);
}

std::vector<CoveragePoint> cover(const setup::Hookup& hookup, const setup::Stair& stair, std::uint64_t first,
                                 std::uint64_t seeds) {
  std::vector<CoveragePoint> points;
  std::vector<std::size_t> levels;
  for (std::size_t i = 0; i < stair.steps.size(); ++i) {
    if (stair.steps[i].kind == setup::StepKind::level) levels.push_back(i);
  }
  for (std::uint64_t i = 0; i < seeds; ++i) {
    VirtualChoice choice;
    choice.seed = first + i;
    choice.validate = evaluation::Validate::no;
    const VirtualRun run = run_virtually(hookup, stair, choice);
    const std::size_t step = levels.at(i % levels.size());
    const auto& result = run.result.steps.at(step);
    const auto& truth = run.truths.at(step);
    CoveragePoint point;
    point.seed = choice.seed;
    point.label = result.label;
    point.known = truth.known && result.efficiency.known && result.efficiency.uncertainty_known;
    point.truth = truth.truth.efficiency;
    point.value = result.efficiency.value;
    point.low = result.efficiency.low;
    point.high = result.efficiency.high;
    point.implied_half_width = implied_half_width(hookup, stair, truth.truth);
    points.push_back(point);
  }
  return points;
}

CoverageSummary summarise(const std::vector<CoveragePoint>& points) {
  CoverageSummary summary;
  std::vector<double> ratios;
  for (const auto& point : points) {
    ++summary.counted;
    if (!point.known) {
      ++summary.without;
      continue;
    }
    if (point.holds()) ++summary.holding;
    ratios.push_back(point.width_ratio());
  }
  if (summary.counted > 0) {
    summary.share = static_cast<double>(summary.holding) / static_cast<double>(summary.counted);
  }
  if (!ratios.empty()) {
    std::nth_element(ratios.begin(), ratios.begin() + static_cast<std::ptrdiff_t>(ratios.size() / 2),
                     ratios.end());
    summary.median_width_ratio = ratios[ratios.size() / 2];
  }
  return summary;
}

}  // namespace loadstair::whole
