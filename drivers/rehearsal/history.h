// The plant's recent past, for meters that integrate and scopes that look back; and the truth of the whole
// run.
#pragma once

#include <cstddef>
#include <vector>

#include "drivers/rehearsal/plant.h"

namespace loadstair::rehearsal {

/// Means over a window, of everything a step holds. `wave`, the frequency and the flags are those of its last
/// step.
using StepMeans = PlantStep;

/// The true means over a window at the converter's terminals.
struct Truth {
  double input_power_w = 0.0;
  double output_power_w = 0.0;
  double efficiency = 0.0;  ///< output over input; 0 when there is no input power
  double loss_w = 0.0;
  double junction_c = 0.0;  ///< at the window's end
  double case_c = 0.0;
  double ambient_c = 0.0;
};

class History {
 public:
  /// Keeps `kept_s` of steps in full, and energies and temperatures of every step.
  History(double step_s, double kept_s);

  void push(const PlantStep& step);
  [[nodiscard]] std::size_t steps() const { return energies_.size() - 1; }
  [[nodiscard]] double end_s() const { return static_cast<double>(steps()) * step_s_; }
  [[nodiscard]] double step_s() const { return step_s_; }

  /// Means from `from_s` to `to_s`, shares of steps counted; clipped to what is kept. An empty window gives
  /// the step at its end; no step at all gives zeros.
  [[nodiscard]] StepMeans means(double from_s, double to_s) const;
  /// The step that holds `time_s`, the nearest kept one otherwise. Precondition: steps() > 0.
  [[nodiscard]] const PlantStep& at(double time_s) const;
  /// True mean powers over a window, however long ago; clipped to what has been.
  [[nodiscard]] Truth truth(double from_s, double to_s) const;

 private:
  struct Energies {
    double input_j = 0.0;
    double output_j = 0.0;
    float junction_c = 0.0F;
    float case_c = 0.0F;
    float ambient_c = 0.0F;
  };
  [[nodiscard]] Energies energies_at(double time_s) const;

  double step_s_;
  std::vector<PlantStep> ring_;
  std::size_t capacity_;
  std::vector<Energies> energies_;  ///< cumulative, at the end of each step, from zero
};

}  // namespace loadstair::rehearsal
