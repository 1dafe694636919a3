// Two runs held against each other: which differences are resolved, and on what that hangs.
#pragma once

#include <optional>
#include <span>
#include <string>
#include <vector>

#include "analysis/efficiency/between_runs.h"
#include "analysis/efficiency/loss_pieces.h"

namespace loadstair::efficiency {

/// Around one level, as far as it is known.
struct Around {
  std::optional<double> input_voltage_v;  ///< magnitude; RMS on AC
  std::optional<double> ambient_c;
  /// How the level's loss goes with them, W/V and W/K, where that was measured: then the difference is moved
  /// along it instead of being allowed for.
  std::optional<Estimate> loss_per_volt{};
  std::optional<Estimate> loss_per_kelvin{};
};

/// A weighted figure of one run.
struct ComparedFigure {
  std::string title;  ///< figures of one title are compared
  Quoted efficiency = base::Refusal{};
};

/// One run. `run` is its name in keys ("7"); `unit` names the board ("C-003") and may be empty.
struct ComparedRun {
  std::string run;
  std::string unit;
  std::vector<CurvePoint> points;  ///< by rising output power
  std::vector<Around> around;      ///< one per point, or empty
  std::vector<LossPiece> pieces;   ///< of fit_loss_models(); may be empty
  std::vector<ComparedFigure> weighted;
};

/// reference  what the other one is compared to
/// rated_w    rated output power, above zero
/// not_common Owner::instrument of meters and parts whose lasting errors the runs do not share
/// reconnected  whether a repeat with reconnection is known of
struct ComparisonInput {
  ComparedRun reference, other;
  double rated_w = 0;
  std::vector<std::string> not_common;
  bool reconnected = false;
};

inline constexpr double kCommonLoadWithin = 0.02;     ///< of rated power
inline constexpr double kCommonVoltageWithin = 0.02;  ///< of the reference's input voltage
/// Loss over input voltage: its exponent is taken within +-this (conduction falls with the square of the
/// voltage, core and switching rise with it). Common practice, no source.
inline constexpr double kVoltageExponent = 2;
/// Loss over ambient: at most this share a kelvin (copper 0.39 %/K). Common practice, no source.
inline constexpr double kLossPerKelvin = 0.004;

enum class Decided { better, worse, not_resolved, refused };
[[nodiscard]] std::string name_of(Decided decided);

/// One figure of both runs: a level, or a weighted efficiency.
struct Difference {
  std::string label;                    ///< of the reference's level; title of a weighted figure
  double load_w = 0;                    ///< common load; 0 for a weighted figure
  Quoted efficiency = base::Refusal{};  ///< other minus reference, ratio
  Quoted loss = base::Refusal{};        ///< the same, W; refused for a weighted figure
  Decided decided = Decided::refused;
  double adjusted_p = 1;           ///< by Holm's method
  double unshared = 0;             ///< share of the meters' variance taken as each run's own
  std::optional<double> flips_at;  ///< share at which the decision changes; nullopt: none does
  double narrowing = 1;            ///< half-width if no source were shared, over the half-width
  std::string text;
};

struct Comparison {
  std::vector<Difference> levels;
  std::vector<Difference> weighted;
  std::vector<std::string> remarks;
};

/// Both runs at common loads - the mean of the two measured powers - moved there by the slope of the loss:
/// (slope_near(): of the model of the level's piece, else between neighbours). Efficiencies differ at a load
/// that is known exactly, so that what is not known of each power moves along the slope too. A level is
/// refused, with the reason, when the runs lie apart by more than 2 % of rated power or 2 % of the input
/// voltage, or a figure is not finite. The other run's loss is moved to the reference's input voltage and
/// ambient along the slopes that either run gives (the other's own first); where none is known, the
/// difference enters as an uncertainty of the loss.
///
/// Sources of one key cancel as far as both figures follow them alike. A level is better or worse where its
/// two-sided p by Student's t falls to 5 % by Holm's method over the levels that were compared; weighted
/// figures are judged the same way among themselves. The interval of a difference is its own 95 % one.
///
/// flips_at is found with the other levels as they are.
/// Errors:  refused as a whole when the rated power is not above zero.
/// Cost:    quadratic in levels.
/// Source:  JCGM 100:2008 F.1.2.3 (common sources); Holm 1979, Scand. J. Statist. 6, 65.
[[nodiscard]] base::Outcome<Comparison> compare(const ComparisonInput& input);

/// Holm's adjusted p values, in the order given: in rising order the i-th of m is max over j <= i of
/// min(1, (m - j + 1) p_j). Every p in [0, 1]. Source: Holm 1979, Scand. J. Statist. 6, 65.
[[nodiscard]] std::vector<double> holm_adjusted(std::span<const double> p);

}  // namespace loadstair::efficiency
