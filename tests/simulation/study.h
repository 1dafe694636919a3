// Counting how often the intervals of the program hold the simulation's truth.
#pragma once

#include <cstdint>
#include <functional>
#include <string>
#include <vector>

#include "daemon/evaluation/evaluate.h"
#include "simulation/implied.h"
#include "simulation/record.h"

namespace loadstair::simulation {

/// One figure of one draw against its truth.
struct Judged {
  bool known = false;
  double truth = 0.0, value = 0.0, low = 0.0, high = 0.0;
  double implied = 0.0;  ///< noise-free half-width; 0: not asked
  bool warned = false;

  [[nodiscard]] bool holds() const { return known && low <= truth && truth <= high; }
};

/// Many of them.
struct Tally {
  std::size_t counted = 0, holding = 0, unknown = 0, warned = 0, holding_or_warned = 0;
  std::vector<double> width_ratios, errors;  ///< half-width over implied; error over half-width

  void add(const Judged& one);
  [[nodiscard]] double share() const;
  [[nodiscard]] double share_with_warnings() const;
  [[nodiscard]] double median_width_ratio() const;
};
[[nodiscard]] double quantile(std::vector<double> values, double share);
[[nodiscard]] double median(std::vector<double> values);

/// What is judged of a bench: one step of one run, and the same step of a second board's run.
struct Outcome {
  Bench bench;
  Judged efficiency, loss, input, output, difference;
  /// Half-width of the difference with nothing shared over the one with sources shared, and what that ratio
  /// is by the share of variance that is not shared.
  double narrowing = 0.0, expected_narrowing = 0.0;
  std::vector<std::string> remarks;
};

struct StudyChoice {
  BenchChoice bench;
  ErrorShares truth;  ///< how the meters' errors really split; the program assumes what the file says
  bool with_difference = true;
};

[[nodiscard]] Outcome study(std::uint64_t seed, const StudyChoice& choice);

struct Study {
  Tally efficiency, loss, input, output, difference;
  std::vector<double> narrowing, narrowing_against_expected;
};
/// `draws` benches from `first` on. each  is shown every outcome; may be empty
[[nodiscard]] Study run_study(std::uint64_t first, std::uint64_t draws, const StudyChoice& choice,
                              const std::function<void(const Outcome&)>& each = {});

/// Forecast half-width of the efficiency over the one that a run then has, one per draw; draws without either
/// are left out.
[[nodiscard]] std::vector<double> forecast_ratios(std::uint64_t first, std::uint64_t draws);

/// A line a figure: "efficiency  95.4 % of 2000 hold, half-width 1.02 of the noise-free one, ...".
[[nodiscard]] std::string described(const Study& study);

}  // namespace loadstair::simulation
