// Propagation of distributions by Monte Carlo, and whether it bears the linear interval out.
#pragma once

#include <cstddef>
#include <cstdint>
#include <functional>
#include <span>
#include <vector>

#include "analysis/base/outcome.h"
#include "analysis/estimate/coverage.h"
#include "analysis/estimate/estimate.h"

namespace loadstair::estimate {

/// Stored with every result that used it.
inline constexpr std::uint64_t kMonteCarloSeed = 20080901;

/// The result as a function of the inputs' values, in their order. Called from one thread at a time.
using Model = std::function<double(std::span<const double> inputs)>;

/// The same for many draws at once: inputs[i][j] is input i at draw j; result[j] is to be written. Fast: no
/// call per draw, and the compiler can use vectors.
using BlockModel =
    std::function<void(std::span<const std::span<const double>> inputs, std::span<double> result)>;

struct MonteCarloSettings {
  std::uint64_t seed = kMonteCarloSeed;
  std::size_t draws = 1'000'000;  ///< at least 1000
  double level = kLevel;
  bool keep_draws = false;  ///< whether the sorted draws stay in the result
};

struct Interval {
  double low = 0;
  double high = 0;
};

/// A distribution known by its draws, in the unit of the model's result.
struct MonteCarlo {
  double mean = 0;
  double standard_deviation = 0;
  Interval shortest;   ///< of the level; where several are equally short, the lowest
  Interval symmetric;  ///< as much probability below as above
  double level = kLevel;
  std::size_t draws = 0;
  std::uint64_t seed = 0;
  std::vector<double> sorted;  ///< the draws, ascending; empty unless kept
  /// Of the adaptive procedure: whether twice the standard deviation of mean, deviation and both ends of the
  /// shortest interval fell below the tolerance before the draws ran out. Always true for a fixed number.
  bool stabilised = true;
  double tolerance = 0;  ///< what the adaptive procedure aimed at; 0 for a fixed number of draws
};

/// Draws every distinct source once per draw and evaluates the model at value + sum contribution x draw.
/// Distributions, standardised: Type B as the source says (normal, rectangular, triangular, arcsine); Type A,
/// and Type B normal with finite degrees of freedom, Student's t with the contribution as its scale, so that
/// its variance is nu/(nu - 2) times the linear one. Sources of one Type A sample share one chi (multivariate
/// t; the least of their degrees of freedom). Finite degrees of freedom of other Type B shapes are ignored.
/// A source's draws depend on the seed and its key alone: two propagations of results that share a source see
/// the same draws of it, and neither order nor threads change anything.
/// Errors:  refused when the level is not within (0, 1), a source's degrees of freedom are not above zero, or
///          the model has no finite value at some draw (its range of validity is left: no distribution).
/// Cost:    draws x (sources + one evaluation).
/// Source:  JCGM 101:2008 6.4 (distributions), 6.4.9 (Type A), 7.2-7.7; the multivariate t is JCGM 102:2011
///          5.3.2.
[[nodiscard]] base::Outcome<MonteCarlo> propagate(const Model& model, std::span<const Estimate> inputs,
                                                  const MonteCarloSettings& settings = {});
[[nodiscard]] base::Outcome<MonteCarlo> propagate_blocks(const BlockModel& model,
                                                         std::span<const Estimate> inputs,
                                                         const MonteCarloSettings& settings = {});

struct AdaptiveSettings {
  std::uint64_t seed = kMonteCarloSeed;
  int significant_digits = 1;  ///< of u that are held to be meaningful, 1 or 2
  /// The procedure stops below this share of the tolerance that the digits give: 1/5 for a validation.
  double tolerance_share = 0.2;
  std::size_t most_draws = 10'000'000;
  double level = kLevel;
  bool keep_draws = false;
};

/// Blocks of draws until the result is stable to the tolerance. Errors: as propagate().
/// Source: JCGM 101:2008 7.9.4 (blocks of max(100/(1 - p), 10^4) draws); 8.2 for the share of 1/5.
[[nodiscard]] base::Outcome<MonteCarlo> propagate_adaptively(const Model& model,
                                                             std::span<const Estimate> inputs,
                                                             const AdaptiveSettings& settings = {});
[[nodiscard]] base::Outcome<MonteCarlo> propagate_blocks_adaptively(const BlockModel& model,
                                                                    std::span<const Estimate> inputs,
                                                                    const AdaptiveSettings& settings = {});

/// Half a unit of the last of the significant digits of u: u = c x 10^l with c of so many digits, delta =
/// 10^l / 2; 0 for u = 0. Source: JCGM 101:2008 7.9.2.
[[nodiscard]] double numerical_tolerance(double standard_uncertainty, int significant_digits = 1);

struct Validation {
  bool agrees = false;
  double low_difference = 0;   ///< |linear low - Monte Carlo low|
  double high_difference = 0;  ///< |linear high - Monte Carlo high|
  double tolerance = 0;        ///< delta
};

/// Whether both ends of the linear interval lie within the tolerance of the shortest Monte Carlo interval.
/// The tolerance is that of the linear standard uncertainty (of the Monte Carlo one where that is zero).
/// A result that was not stabilised validates nothing. Source: JCGM 101:2008 8.1.
[[nodiscard]] Validation validate(const Coverage& linear, const MonteCarlo& found,
                                  int significant_digits = 1);

/// The interval to report: the linear one where it agrees, else the shortest Monte Carlo interval about the
/// Monte Carlo mean, without k and U.
[[nodiscard]] Coverage reported(const Coverage& linear, const MonteCarlo& found,
                                const Validation& validation);

}  // namespace loadstair::estimate
