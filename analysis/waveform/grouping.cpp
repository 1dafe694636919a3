#include <algorithm>
#include <cmath>
#include <numbers>
#include <string>

#include "analysis/base/number.h"
#include "analysis/waveform/channel.h"
#include "analysis/waveform/lines.h"
#include "analysis/waveform/transform.h"

namespace loadstair::waveform {
namespace {

using base::Refusal;

constexpr double kSmoothing_s = 1.5;

/// Squares of the groups of one window. lines: squared RMS of the lines 5 Hz apart; n lines between
/// harmonics.
struct WindowGroups {
  std::vector<double> group, subgroup, interharmonic, interharmonic_subgroup;
};

WindowGroups groups_of(const std::vector<double>& line, std::size_t n, std::size_t orders) {
  WindowGroups out;
  const auto sum = [&](std::size_t first, std::size_t last) {
    double total = 0.0;
    for (std::size_t k = first; k <= last && k < line.size(); ++k) total += line[k];
    return total;
  };
  for (std::size_t h = 1; h <= orders; ++h) {
    const std::size_t at = n * h;
    const std::size_t half = n / 2;
    const double upper_edge = at + half < line.size() ? line[at + half] : 0.0;
    out.group.push_back(0.5 * line[at - half] + sum(at - half + 1, at + half - 1) + 0.5 * upper_edge);
    out.subgroup.push_back(sum(at - 1, at + 1));
    out.interharmonic.push_back(sum(at + 1, at + n - 1));
    out.interharmonic_subgroup.push_back(sum(at + 2, at + n - 2));
  }
  return out;
}

/// Squared RMS of every line of one window of n cycles.
std::vector<double> window_lines(const Prepared& prepared, double begin, double length) {
  const double whole = std::round(length);
  const bool on_samples = std::abs(length - whole) < 1e-6 && std::abs(begin - std::round(begin)) < 1e-6;
  const std::size_t count =
      on_samples ? static_cast<std::size_t>(whole) : good_size(static_cast<std::size_t>(std::ceil(length)));
  const auto spectrum = real_transform(count, [&](double* into) {
    resample(prepared, on_samples ? std::round(begin) : begin, on_samples ? whole : length, count, into);
  });
  std::vector<double> line(spectrum.size());
  for (std::size_t k = 0; k < line.size(); ++k) {
    line[k] = 2.0 * std::norm(spectrum[k]) / (static_cast<double>(count) * static_cast<double>(count));
  }
  line[0] *= 0.5;
  return line;
}

struct Spread {
  double median = 0.0, low = 0.0, high = 0.0;
};

Spread spread_of(const std::vector<std::vector<double>>& by_window, std::size_t index) {
  std::vector<double> values;
  for (const auto& window : by_window) values.push_back(std::sqrt(window[index]));
  Spread out{0.0, *std::min_element(values.begin(), values.end()),
             *std::max_element(values.begin(), values.end())};
  out.median = median(values);
  return out;
}

double thd(const std::vector<double>& squares) {
  double sum = 0.0;
  for (std::size_t h = 1; h < squares.size(); ++h) sum += squares[h];
  return squares[0] > 0.0 ? std::sqrt(sum / squares[0]) : 0.0;
}

/// 10 cycles of a 50 Hz system, 12 of a 60 Hz one; each takes what is nearer, within about 10 %.
base::Outcome<int> cycles_of_window(double frequency_hz) {
  constexpr double kLeast = 45.0, kBetween = 55.0, kMost = 66.0;
  if (frequency_hz < kLeast || frequency_hz > kMost) {
    return Refusal{"grouping", base::print_significant(frequency_hz, 4) +
                                   " Hz, no grouping: IEC 61000-4-7 defines windows at 50 and 60 Hz"};
  }
  return frequency_hz < kBetween ? 10 : 12;
}

/// A window's own period where the record can tell it from `period`, else `period`.
GroupWindow synchronised(const Prepared& reference, double begin, double period, int cycles,
                         double past_end) {
  constexpr int kRounds = 3;
  constexpr double kDeviations = 3.0;
  constexpr double kLeastChange = 1e-6;
  double own = period;
  double u = 0.0;
  for (int round = 0; round < kRounds; ++round) {
    const LocalFrequency local = local_frequency(reference, begin, own, cycles);
    u = local.standard_uncertainty;
    const double moved = 1.0 / local.frequency;
    // Beyond 10 % the phase belongs to something else; beyond the record there is nothing to look at.
    constexpr double kMostChange = 0.1;
    if (!(std::abs(moved / period - 1.0) < kMostChange) || begin + moved * cycles > past_end) break;
    own = moved;
  }
  if (std::abs(own / period - 1.0) < std::max(kDeviations * u * period, kLeastChange)) own = period;
  return {begin, own * cycles, 1.0 / own, u};
}

/// Smoothed values of one order over the windows: mean and greatest.
struct Smoothed {
  double mean = 0.0, high = 0.0;
};

/// y = y + (x - y)(1 - exp(-T/1.5 s)), from the first window on. IEC 61000-4-7, figure of the smoothing (its
/// coefficients 8.012 and 7.012 from memory: 1 - exp(-0.2/1.5) = 1/8.011).
Smoothed smooth(const std::vector<std::vector<double>>& squares, std::size_t order,
                const std::vector<GroupWindow>& windows, double interval_s) {
  double state = std::sqrt(squares.front()[order]);
  Smoothed out;
  for (std::size_t w = 0; w < squares.size(); ++w) {
    const double duration_s = windows[w].length_samples * interval_s;
    state += (std::sqrt(squares[w][order]) - state) * (1.0 - std::exp(-duration_s / kSmoothing_s));
    out.mean += state / static_cast<double>(squares.size());
    out.high = std::max(out.high, state);
  }
  return out;
}

base::Outcome<std::vector<SmoothedOrder>> smoothed_orders(const std::vector<std::vector<double>>& group,
                                                          const std::vector<std::vector<double>>& subgroup,
                                                          const std::vector<GroupWindow>& windows,
                                                          double interval_s) {
  double duration_s = 0.0;
  for (const GroupWindow& window : windows) duration_s += window.length_samples * interval_s;
  if (duration_s < kSmoothing_s) {
    return Refusal{"smoothing", base::print_significant(duration_s, 3) +
                                    " s of windows; smoothing over 1.5 s needs at least as much"};
  }
  std::vector<SmoothedOrder> out;
  for (std::size_t h = 0; h < group.front().size(); ++h) {
    const Smoothed g = smooth(group, h, windows, interval_s);
    const Smoothed s = smooth(subgroup, h, windows, interval_s);
    out.push_back({static_cast<int>(h) + 1, g.mean, g.high, s.mean, s.high});
  }
  return out;
}

}  // namespace

base::Outcome<std::vector<GroupWindow>> group_windows(const Prepared& reference, const CycleWindow& window,
                                                      double interval_s) {
  const auto cycles = cycles_of_window(1.0 / (window.period * interval_s));
  if (!cycles) return cycles.refusal();
  if (window.cycles < *cycles) {
    return Refusal{"grouping", base::print_integer(window.cycles) + " cycles, no grouping"};
  }
  constexpr double kRounding = 1e-6;
  const double past_end = std::max(window.span.end, static_cast<double>(reference.size()) - 1.0) + kRounding;
  std::vector<GroupWindow> out;
  double begin = window.span.begin;
  // The last window may be the record's whole length, to rounding: its end is then the record's.
  while (begin + window.period * *cycles <= past_end) {
    GroupWindow next = synchronised(reference, begin, window.period, *cycles, past_end);
    begin += next.length_samples;
    next.frequency_hz /= interval_s;
    next.standard_uncertainty_hz /= interval_s;
    out.push_back(next);
  }
  return out;
}

base::Outcome<GroupedHarmonics> group_harmonics(const Prepared& prepared,
                                                const base::Outcome<std::vector<GroupWindow>>& windows,
                                                double interval_s, int orders) {
  if (!windows) return windows.refusal();
  GroupedHarmonics out;
  out.window_list = *windows;
  out.windows = static_cast<int>(windows->size());
  const GroupWindow& front = windows->front();
  out.cycles_per_window =
      static_cast<int>(std::lround(front.length_samples * interval_s * front.frequency_hz));
  std::vector<std::vector<double>> group, subgroup, interharmonic, interharmonic_subgroup;
  std::vector<double> thd_group, thd_subgroup;
  for (const GroupWindow& window : *windows) {
    out.synchronisation =
        std::max(out.synchronisation, 2.0 * window.standard_uncertainty_hz / window.frequency_hz);
    const auto line = window_lines(prepared, window.first_sample, window.length_samples);
    WindowGroups groups =
        groups_of(line, static_cast<std::size_t>(out.cycles_per_window), static_cast<std::size_t>(orders));
    thd_group.push_back(thd(groups.group));
    thd_subgroup.push_back(thd(groups.subgroup));
    group.push_back(std::move(groups.group));
    subgroup.push_back(std::move(groups.subgroup));
    interharmonic.push_back(std::move(groups.interharmonic));
    interharmonic_subgroup.push_back(std::move(groups.interharmonic_subgroup));
  }
  for (std::size_t h = 0; h < static_cast<std::size_t>(orders); ++h) {
    const Spread g = spread_of(group, h);
    const Spread s = spread_of(subgroup, h);
    out.orders.push_back({static_cast<int>(h) + 1, g.median, g.low, g.high, s.median, s.low, s.high,
                          spread_of(interharmonic, h).median, spread_of(interharmonic_subgroup, h).median});
  }
  out.thd_group = median(thd_group);
  out.thd_subgroup = median(thd_subgroup);
  out.smoothed = smoothed_orders(group, subgroup, *windows, interval_s);
  return out;
}

}  // namespace loadstair::waveform
