#include "drivers/scope_csv/time_axis.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <vector>

#include "analysis/base/number.h"

namespace loadstair::scope_csv {
namespace {

constexpr double kJitterShare = 0.01;

/// Nine digits: differences of printed times carry noise beyond.
std::string in_seconds(double time_s) {
  const auto rounded = base::parse_number(base::print_significant(time_s, 9));
  return base::print_number(rounded.value_or(time_s)) + " s";
}

/// The last of `digits` significant digits of the largest time.
double resolution_of(std::span<const double> times_s, int digits) {
  const double largest = std::max(std::abs(times_s.front()), std::abs(times_s.back()));
  if (largest == 0.0) return 0.0;
  // A whisker up, since the logarithm of a power of ten may come out below its whole number.
  const double exponent = std::floor(std::log10(largest) + 1e-12);
  return std::pow(10.0, exponent + 1.0 - std::max(digits, 1));
}

double median_step(std::span<const double> times_s) {
  std::vector<double> steps(times_s.size() - 1);
  for (std::size_t k = 0; k < steps.size(); ++k) steps[k] = times_s[k + 1] - times_s[k];
  const auto middle = steps.begin() + static_cast<std::ptrdiff_t>(steps.size() / 2);
  std::nth_element(steps.begin(), middle, steps.end());
  return *middle;
}

/// The first step that is no step of the usual length, told as what it is.
TimeFault find_fault(std::span<const double> times_s, double tolerance_s) {
  const double usual = median_step(times_s);
  const auto told = [&](std::size_t row) {
    return "the time goes from " + in_seconds(times_s[row - 1]) + " to " + in_seconds(times_s[row]);
  };
  if (usual <= 0.0 && times_s.back() <= times_s.front()) {
    for (std::size_t row = 1; row < times_s.size(); ++row) {
      if (times_s[row] - times_s[row - 1] <= 0.0)
        return {row, told(row) + "; times must rise from row to row"};
    }
  }
  for (std::size_t row = 1; row < times_s.size(); ++row) {
    const double step = times_s[row] - times_s[row - 1];
    if (usual <= 0.0 || std::abs(step - usual) <= tolerance_s) continue;
    if (step < -tolerance_s) {
      return {row, told(row) + ", back where steps of " + in_seconds(usual) +
                       " are usual: a second record; a file holds one, so put it into a file of its own"};
    }
    if (step > 1.5 * usual) {
      return {row, told(row) + ", a gap where steps of " + in_seconds(usual) +
                       " are usual; rows are missing: export the record again, or keep one side of the gap"};
    }
    return {row, told(row) + ", where steps of " + in_seconds(usual) +
                     " are usual; sampling must be uniform: resample the record, or state the interval "
                     "(--interval) if "
                     "the times are wrong"};
  }
  // Every step passes, and yet the times drift off the grid: the rate changes within the record.
  const double interval = (times_s.back() - times_s.front()) / static_cast<double>(times_s.size() - 1);
  std::size_t worst = 0;
  double worst_s = 0.0;
  for (std::size_t row = 1; row < times_s.size(); ++row) {
    const double off = std::abs(times_s[row] - times_s.front() - static_cast<double>(row) * interval);
    if (off <= worst_s) continue;
    worst_s = off;
    worst = row;
  }
  return {worst,
          "the time " + in_seconds(times_s[worst]) + " lies " + in_seconds(worst_s) + " off steps of " +
              in_seconds(interval) +
              " between the first time and the last; sampling must be uniform: resample the record, or state "
              "the interval (--interval) if the times are wrong"};
}

/// A single longer step among equal ones, where rounding would hide it.
std::optional<TimeFault> find_hidden_gap(std::span<const double> times_s, double interval_s,
                                         double resolution_s) {
  if (interval_s > 2.0 * resolution_s || interval_s < 0.99 * resolution_s) return std::nullopt;
  const double usual = median_step(times_s);
  std::size_t odd = 0;
  std::size_t count = 0;
  for (std::size_t row = 1; row < times_s.size(); ++row) {
    if (times_s[row] - times_s[row - 1] < usual + 0.75 * usual) continue;
    odd = row;
    ++count;
  }
  if (count != 1) return std::nullopt;
  return TimeFault{odd,
                   "the time goes from " + in_seconds(times_s[odd - 1]) + " to " + in_seconds(times_s[odd]) +
                       ", a gap where steps of " + in_seconds(usual) +
                       " are usual; export the record again, or state the interval (--interval) if no row is "
                       "missing"};
}

}  // namespace

TimeCheck check_times(std::span<const double> times_s, int digits) {
  TimeCheck check;
  TimeGrid& grid = check.grid;
  const double last = static_cast<double>(times_s.size() - 1);
  grid.start_s = times_s.front();
  grid.interval_s = (times_s.back() - times_s.front()) / last;
  grid.resolution_s = resolution_of(times_s, digits);
  for (std::size_t row = 0; row < times_s.size(); ++row) {
    const double off = times_s[row] - times_s.front() - static_cast<double>(row) * grid.interval_s;
    grid.largest_deviation_s = std::max(grid.largest_deviation_s, std::abs(off));
  }
  // What doubles themselves cannot tell apart.
  const double largest = std::max(std::abs(times_s.front()), std::abs(times_s.back()));
  const double rounding_s = 4.0 * std::numeric_limits<double>::epsilon() * largest;
  const double tolerance_s =
      std::max(grid.resolution_s * 1.000001, kJitterShare * std::abs(grid.interval_s)) + rounding_s;
  if (!(grid.interval_s > 0.0) || !std::isfinite(grid.interval_s) || grid.largest_deviation_s > tolerance_s) {
    // A gap stretches the interval that the ends give; steps are judged by the usual one.
    const double usual = std::max(median_step(times_s), 0.0);
    const double step_tolerance_s = std::max(2.0 * grid.resolution_s, kJitterShare * usual) + rounding_s;
    check.fault = find_fault(times_s, grid.interval_s > 0.0 ? step_tolerance_s : rounding_s);
  } else {
    check.fault = find_hidden_gap(times_s, grid.interval_s, grid.resolution_s);
  }
  return check;
}

}  // namespace loadstair::scope_csv
