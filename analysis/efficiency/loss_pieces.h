// The loss curve in pieces: one model for each, and what can be said between two levels where no model may
// speak.
#pragma once

#include <cstddef>
#include <optional>
#include <span>
#include <string>
#include <vector>

#include "analysis/efficiency/loss_model.h"

namespace loadstair::efficiency {

/// The levels of one segment.
struct LossPiece {
  std::string segment;
  std::size_t levels = 0;
  std::optional<LossModel> model;
  std::string why;  ///< there is no model: why

  /// The model where its figures may be used; nullptr without one, and with significant lack of fit.
  [[nodiscard]] const LossModel* usable() const { return model && !model->lack_of_fit ? &*model : nullptr; }
};

/// A run's curve as others look at it. A view: points and pieces must outlive it.
struct LossCurve {
  std::string_view run;                ///< its name in keys
  std::span<const CurvePoint> points;  ///< by rising output power
  std::span<const LossPiece> pieces;   ///< of fit_loss_models(); empty: no model was asked for
};

/// Names the ranges that the meters of each level were on, where they are not the same at all levels: a range
/// has a gain of its own, and its step is no property of the converter. What a segment was called before
/// stays in front.
void split_by_range(std::span<CurvePoint> points);

/// fit_loss_model() for every segment, in the order of the points. A piece that has too few levels for one
/// stands there without.
[[nodiscard]] std::vector<LossPiece> fit_loss_models(std::span<const CurvePoint> points, double floor_w);

/// The piece that a level lies on; nullptr where no models were asked for.
[[nodiscard]] const LossPiece* piece_of(const LossCurve& curve, const CurvePoint& point);

/// What a power is counted by: a level's output or its input power.
enum class Basis { output_power, input_power };

/// The piece between whose neighbouring levels a power lies, ends included. Errors: refused outside the
/// measured span, between two pieces, and where no models were asked for.
[[nodiscard]] base::Outcome<const LossPiece*> piece_around(const LossCurve& curve, double power_w,
                                                           Basis basis = Basis::output_power);

/// d loss / d P_out at a level, with what is not known of it: of the piece's model; else anywhere between
/// the lines to its neighbours on the same piece (one neighbour: from none to twice that line's slope); else,
/// alone on its piece, anywhere from none to twice the loss over the power, which holds for every p0 + p1 P +
/// p2 P^2 without negative terms. at   index of the level, within the points
[[nodiscard]] Estimate slope_near(const LossCurve& curve, std::size_t at);

/// A loss that was not measured.
struct LossThere {
  double output_power_w = 0;
  Estimate loss;         ///< W
  double slope = 0;      ///< d loss / d P_out
  bool by_model = true;  ///< else between its neighbours
};

/// The loss at a power inside the measured span: of the model of the piece it lies on; where that has none,
/// or one with significant lack of fit, between the two neighbouring levels.
///
/// Local interpolation between levels P0 < P < P1, h apart, with t = (P - P0)/h: the line between them, less
/// d (P - P0)(P1 - P), where d is the second divided difference, mean of those with the next level on either
/// side of the same piece. The loss may have jumped in between (a fan that starts), by as much as explains
/// how unlike both d are: J = (d_below - d_above) h / (1/a_below + 1/a_above), a from outer to far level. So
/// it lies between -t J and (1 - t) J from there, and beyond that by what the mean of both |d| bends,
/// rectangular. With a level on one side only the line is not corrected and J is what explains d alone. With
/// no other level on the piece: below the line by at most (slope/(P0 + P1)) (P - P0)(P1 - P), the most that
/// p0 + p1 P
/// + p2 P^2 without negative terms can bend. Errors:  as piece_around(). Source:  Newton's divided
/// differences; the bounds common practice, no source.
[[nodiscard]] base::Outcome<LossThere> loss_there(const LossCurve& curve, double power_w,
                                                  Basis basis = Basis::output_power);

}  // namespace loadstair::efficiency
