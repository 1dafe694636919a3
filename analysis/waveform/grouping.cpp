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

}  // namespace

base::Outcome<GroupedHarmonics> group_harmonics(const Prepared& prepared, const CycleWindow& window,
                                                double interval_s, int orders) {
  const double frequency_hz = 1.0 / (window.period * interval_s);
  // 50 Hz and 60 Hz systems; each takes what is nearer, within about 10 %.
  constexpr double kLeast = 45.0, kBetween = 55.0, kMost = 66.0;
  if (frequency_hz < kLeast || frequency_hz > kMost) {
    return Refusal{"grouping", base::print_significant(frequency_hz, 4) +
                                   " Hz, no grouping: IEC 61000-4-7 defines windows at 50 and 60 Hz"};
  }
  const int cycles = frequency_hz < kBetween ? 10 : 12;
  if (window.cycles < cycles) {
    return Refusal{"grouping", base::print_integer(window.cycles) + " cycles, no grouping"};
  }
  GroupedHarmonics out;
  out.cycles_per_window = cycles;
  out.windows = window.cycles / cycles;
  std::vector<std::vector<double>> group, subgroup, interharmonic, interharmonic_subgroup;
  std::vector<double> thd_group, thd_subgroup;
  const double length = window.period * cycles;
  for (int w = 0; w < out.windows; ++w) {
    const auto line = window_lines(prepared, window.span.begin + w * length, length);
    WindowGroups groups = groups_of(line, static_cast<std::size_t>(cycles), static_cast<std::size_t>(orders));
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
  return out;
}

}  // namespace loadstair::waveform
