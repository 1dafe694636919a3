// Weighted efficiencies: European and CEC.
#pragma once

#include <span>
#include <string>
#include <vector>

#include "analysis/efficiency/loss_pieces.h"

namespace loadstair::efficiency {

enum class Scheme {
  european,  ///< percent of rated DC (input) power
  cec        ///< percent of rated AC output power
};

struct WeightedLevel {
  double fraction = 0;  ///< of rated power
  double weight = 0;
};

/// 3/6/13/10/48/20 % at 5/10/20/30/50/100 %; 4/5/12/21/53/5 % at 10/20/30/50/75/100 %.
/// Source: EN 50530 (weights: four public copies agree, annex letter from memory); California Energy
/// Commission,
///         performance test protocol 2004/2005.
[[nodiscard]] std::span<const WeightedLevel> levels(Scheme scheme);

/// How one nominal level was had.
struct WeightedUse {
  WeightedLevel level;
  std::string from;     ///< label of the step, "loss model", or "between A and B" where no model may speak
  Estimate efficiency;  ///< at the nominal level, ratio
  Estimate shift;       ///< nominal minus measured efficiency, ratio; zero where nothing was moved
  bool moved = false;
};

struct Weighted {
  std::string title;  ///< "European efficiency", "CEC-weighted at 385 V"
  Quoted efficiency = base::Refusal{};
  std::vector<WeightedUse> uses;  ///< in order of level, as far as they were had
};

inline constexpr double kNominalWithin = 0.02;  ///< of rated: moved by the loss model's slope
inline constexpr double kNominalEqual = 1e-6;   ///< of rated: taken as it is

/// The weighted conversion efficiency of one run at one input voltage. A level within 2 % of rated of a
/// measured one is moved there by the loss's slope (slope_near()); farther ones come from the curve inside
/// its measured span (loss_there(): the model of the piece they lie on, else its neighbours); the rest
/// refuses the whole, with the level and the reason. Tracking is not included. rated_w  rated DC power
/// (European) or rated AC output power (CEC), W, above 0 voltage  printed in the title of a CEC figure at a
/// single voltage ("385 V"); may be empty
/// within  in place of the 2 %, share of rated; at least kNominalEqual
[[nodiscard]] Weighted weighted_efficiency(Scheme scheme, double rated_w, const LossCurve& curve,
                                           std::string_view voltage = {}, double within = kNominalWithin);

/// The same of a curve in one piece. model  nullptr where none was fitted: then nothing comes from the curve
[[nodiscard]] Weighted weighted_efficiency(Scheme scheme, double rated_w, std::span<const CurvePoint> points,
                                           const LossModel* model, std::string_view voltage = {});

/// The CEC figure over three DC voltages: the mean of their weighted figures; fewer than three are refused.
[[nodiscard]] Weighted cec_over_voltages(std::span<const Weighted> by_voltage);

}  // namespace loadstair::efficiency
