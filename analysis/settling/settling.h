// settling: is it steady, and where will it end? Criteria by rate and by slope, exponential fits with a
// guarded prediction, change points. Not for stepping (daemon/sequencer) and not for converting readings
// (sensors).
#pragma once

#include <cstddef>
#include <optional>
#include <span>
#include <string>
#include <vector>

#include "analysis/base/outcome.h"
#include "analysis/series/time_series.h"

namespace loadstair::settling {

/// One channel over time, oldest first: times rise (s), values are finite.
using Trace = series::TimeSeries;

/// The part from the first sample at or after t_s on.
[[nodiscard]] Trace since(const Trace& trace, double t_s);

/// Which rule said that it is settled.
enum class SettledBy { nothing, electrical_slope, thermal_rate, prediction };

/// An interval around a value, at 95 %.
struct Interval {
  double value = 0.0;
  double low = 0.0;
  double high = 0.0;
};

/// What a test of a trace found.
struct Verdict {
  bool settled = false;
  SettledBy by = SettledBy::nothing;
  std::string why;               ///< for a person: what holds, or what is missing
  std::optional<Interval> end;   ///< where it ends: predicted, or the last value when measured
  bool end_predicted = false;    ///< true: `end` is extrapolated; false: measured
  std::optional<double> wait_s;  ///< how long still, as far as can be said; 0 when settled
};

// --- electrical
// -------------------------------------------------------------------------------------------------

struct SlopeCriterion {
  double window_s = 10.0;    ///< last window that is looked at, > 0
  double limit_per_s = 0.0;  ///< largest |slope| in the value's unit per second, > 0
  std::size_t least_samples = 5;
};
/// Settled when the whole 95 % interval of the slope lies within the limit. Where noise is wider than the
/// limit the slope is not resolved, and that is not settled. The slope's uncertainty includes the correlation
/// of the residuals (initial positive sequence, Geyer 1992).
base::Outcome<Verdict> settled_by_slope(const Trace& trace, const SlopeCriterion& criterion);

// --- thermal by rate
// --------------------------------------------------------------------------------------------

struct RateCriterion {
  double change = 1.0;      ///< largest change within the window, in K, > 0
  double window_s = 900.0;  ///< > 0
  int count = 1;            ///< so many windows in a row, one after another
  double hold_s = 0.0;      ///< the criterion has to hold so long
  bool rise_only = false;   ///< true: only an upward change counts
};
/// Settled when the value changed by at most `change` between the ends of the last window, `count` windows in
/// a row, and did so for `hold_s`. A line over the window/20 at each end gives the value there, so that
/// noise does not decide. Within the window the course may not go farther up or down either (means of its
/// twentieths, less what noise makes of them): a fan's cycle that fits the window has equal ends. `wait_s`
/// comes from the closed form of one time constant where a fit exists: -tau ln(d/(D(exp(w/tau)-1))).
base::Outcome<Verdict> settled_by_rate(const Trace& trace, const RateCriterion& criterion);

// --- exponential fits
// -------------------------------------------------------------------------------------------

/// T(t) = end - sum of amplitude_i exp(-(t - start_s)/tau_i), tau ascending.
struct ExponentialFit {
  double start_s = 0.0;
  double end = 0.0;
  double end_standard_error = 0.0;
  std::vector<double> amplitude;
  std::vector<double> amplitude_standard_error;
  std::vector<double> tau_s;
  std::vector<double> tau_standard_error_s;
  std::size_t samples = 0;  ///< readings of the trace
  std::size_t points = 0;   ///< what was fitted: the readings, or 128 means of neighbours where they are many
  std::size_t degrees_of_freedom = 0;        ///< of the points
  double residual_sum_of_squares = 0.0;      ///< over the points
  double residual_standard_deviation = 0.0;  ///< of a point: sqrt(RSS / degrees of freedom)
  double effective_points =
      0.0;  ///< how many of the points are independent, from their residuals' correlation

  [[nodiscard]] double at(double t_s) const;
  [[nodiscard]] double longest_tau_s() const { return tau_s.back(); }
};

/// One time constant by variable projection (Golub and Pereyra 1973): linear in end and amplitude, a search
/// in tau. Refuses fewer than 5 samples, times that do not rise, values that are not finite, a trace without
/// curvature (tau runs beyond 500 times the span or below the sampling).
base::Outcome<ExponentialFit> fit_exponential(const Trace& trace);

/// Two time constants, the same way. Refuses fewer than 8 samples, or when the second constant is not
/// resolved.
base::Outcome<ExponentialFit> fit_two_exponentials(const Trace& trace);

/// Sums of decaying exponentials without an end: y = sum of a_i exp(-b_i t), or y = b1 (1 - exp(-b2 t)) with
/// `through_zero`. General enough for the reference data sets; start values are rates b_i, > 0.
struct DecayFit {
  std::vector<double> amplitude;
  std::vector<double> rate;
  std::vector<double> amplitude_standard_error;
  std::vector<double> rate_standard_error;
  double residual_sum_of_squares = 0.0;
  double residual_standard_deviation = 0.0;
};
/// Terms come back slow first. Refuses spans of unequal length, too few points, values that are not finite,
/// starts that are not above zero, terms that cannot be told apart.
base::Outcome<DecayFit> fit_decays(std::span<const double> x, std::span<const double> y,
                                   std::span<const double> start_rates);
/// y = b1 (1 - exp(-b2 x)): amplitude {b1}, rate {b2}. start_rate any positive number.
base::Outcome<DecayFit> fit_saturation(std::span<const double> x, std::span<const double> y,
                                       double start_rate);

// --- prediction
// -------------------------------------------------------------------------------------------------

struct PredictionCriterion {
  double tolerance = 1.0;      ///< upper end of the remaining rise must lie below it, K, > 0
  double slowest_tau_s = 0.0;  ///< slowest constant the object may have; 0: five times the longest one found
  bool may_end_step = true;    ///< the stair file allows it; false: predict, but never settle by it
};

/// A prediction with everything it was judged by.
struct Prediction {
  bool accepted = false;
  Interval end;        ///< envelope of the fits, widened for what the window could hide
  Interval remaining;  ///< end minus the present value
  ExponentialFit one;
  std::optional<ExponentialFit> two;
  double longest_tau_high_s = 0.0;  ///< upper end of the 95 % interval of the longest constant
  double window_s = 0.0;
  double observed_share = 0.0;  ///< observed rise / predicted rise
  bool window_long_enough = false;
  bool enough_rise = false;
  bool halves_agree = false;
  bool residuals_random = false;  ///< runs test (Wald and Wolfowitz 1940)
  bool remaining_small = false;
  std::string why;               ///< the conditions that fail, or that all hold
  std::optional<double> wait_s;  ///< until the failing conditions could hold, as far as can be said
};

/// Predicts the end of a trace that starts at a change point. ambient: same times, or empty; its value is
/// subtracted and the prediction holds for the last ambient. Refuses what fit_exponential() refuses.
base::Outcome<Prediction> predict_end(const Trace& trace, std::span<const double> ambient,
                                      const PredictionCriterion& criterion);

// --- change points
// ----------------------------------------------------------------------------------------------

struct ChangePointSettings {
  double least_jump = 0.0;  ///< smallest change of slope*time or level that counts; 0: from noise alone
  std::size_t least_samples = 10;  ///< of the record; change points themselves are at least 8 blocks apart
};
/// Times at which the trace bends or jumps in a way one exponential approach does not (a fan that starts, a
/// load that moved); empty when none. The window of a prediction starts at the last one.
base::Outcome<std::vector<double>> change_points(const Trace& trace,
                                                 const ChangePointSettings& settings = {});

// --- together
// ---------------------------------------------------------------------------------------------------

/// How a step's temperature ends.
struct ThermalCriterion {
  RateCriterion rate;
  std::optional<PredictionCriterion> prediction;
};
/// The trace since the step began: change points first, then prediction when asked for, then rate. `end` is
/// the predicted end when there is one, else the last value with the remaining rise as interval.
base::Outcome<Verdict> settled_thermally(const Trace& trace, std::span<const double> ambient,
                                         const ThermalCriterion& criterion);

}  // namespace loadstair::settling
