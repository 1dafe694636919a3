#include "drivers/instrument/stuck.h"

#include <algorithm>
#include <cmath>

namespace loadstair::instrument {
namespace {

// With noise of half a count a run of fifty equal conversions has a chance below 1e-8 (0.68 to the 50th);
// with less noise, four different values among sixteen changes do not come about.
constexpr std::int64_t kRunConversions = 50;
constexpr std::int64_t kRunTimesLongest = 10;
constexpr std::size_t kDifferentValues = 4;
constexpr std::size_t kReversals = 5;
// "Narrow": this many of the smallest steps seen, or this share of the value.
constexpr double kBandSteps = 30.0;
constexpr double kBandShare = 0.05;

}  // namespace

bool StuckWatch::observe(double value, std::int64_t t_ns) {
  if (any_ && value == last_) {
    const auto run_ns = t_ns - since_ns_;
    return run_ns > kRunConversions * conversion_ns_ && run_ns > kRunTimesLongest * longest_run_ns_ &&
           restless_around(value);
  }
  if (any_) longest_run_ns_ = std::max(t_ns - since_ns_, longest_run_ns_ - longest_run_ns_ / 8);
  changes_[count_ % kKept] = value;
  ++count_;
  last_ = value;
  since_ns_ = t_ns;
  any_ = true;
  return false;
}

bool StuckWatch::restless_around(double value) const {
  if (count_ < kKept) return false;
  std::array<double, kKept> in_time{};
  for (std::size_t i = 0; i < kKept; ++i) in_time[i] = changes_[(count_ + i) % kKept];
  std::size_t reversals = 0;
  double smallest_step = HUGE_VAL;
  for (std::size_t i = 1; i < kKept; ++i) {
    const double step = in_time[i] - in_time[i - 1];
    smallest_step = std::min(smallest_step, std::abs(step));
    if (i > 1 && (step > 0) != (in_time[i - 1] > in_time[i - 2])) ++reversals;
  }
  std::sort(in_time.begin(), in_time.end());
  const auto different =
      static_cast<std::size_t>(std::distance(in_time.begin(), std::unique(in_time.begin(), in_time.end())));
  const double low = in_time.front();
  const double high = in_time[different - 1];
  const bool narrow = high - low <= std::max(kBandSteps * smallest_step, kBandShare * std::abs(value));
  return narrow && different >= kDifferentValues && reversals >= kReversals && value >= low && value <= high;
}

}  // namespace loadstair::instrument
