// usage: coverage [SEEDS [FIRST]]: prints a line a seed and the summary.
#include <gsl/gsl_errno.h>

#include <cstdio>

#include "analysis/base/number.h"
#include "whole/coverage.h"

using namespace loadstair;

int main(int argc, char** argv) {
  gsl_set_error_handler_off();
  const auto seeds = static_cast<std::uint64_t>(argc > 1 ? base::parse_integer(argv[1]).value_or(200) : 200);
  const auto first = static_cast<std::uint64_t>(argc > 2 ? base::parse_integer(argv[2]).value_or(1) : 1);
  const auto points = whole::cover(whole::sample_hookup(), whole::sample_stair(), first, seeds);
  for (const auto& point : points) {
    std::printf("seed %llu, %s: true %.5f, found %.5f (%.5f to %.5f)%s, half-width %.3f of the implied\n",
                static_cast<unsigned long long>(point.seed), point.label.c_str(), point.truth, point.value,
                point.low, point.high, point.holds() ? "" : " MISSED",
                point.known ? point.width_ratio() : 0.0);
  }
  const auto summary = whole::summarise(points);
  std::printf(
      "%zu seeds: %zu hold the truth (%.1f %%), %zu without an efficiency; median half-width %.3f of the one "
      "that the declared specifications imply\n",
      summary.counted, summary.holding, 100.0 * summary.share, summary.without, summary.median_width_ratio);
  return summary.share >= 0.91 && summary.median_width_ratio >= 0.95 && summary.median_width_ratio <= 1.4 ? 0
                                                                                                          : 1;
}
