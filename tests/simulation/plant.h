// The converter on its bench through one averaging window: what really flows, and what a meter's terminals
// really see of it.
#pragma once

#include <complex>
#include <string>
#include <vector>

#include "simulation/bench.h"

namespace loadstair::simulation {

/// One port at one instant, at the converter's terminals. Voltage in phase with the real axis; of a DC port
/// both are real. RMS values on AC.
struct PortMoment {
  std::complex<double> voltage, current;
  double power = 0.0;  ///< W, with what ripple carries
};

struct Moment {
  PortMoment input, output;
};

/// Resistances of one port as they are, for the ranges in use. Voltmeter: infinite where none is known of.
struct Wiring {
  double voltmeter_ohm = 0.0, ammeter_ohm = 0.0, lead_ohm = 0.0, shunt_ohm = 0.0;  ///< voltmeter 0: infinite
};

struct Truth {
  double input_w = 0.0, output_w = 0.0, efficiency = 0.0, loss_w = 0.0;
};

class Window {
 public:
  /// level  index into the bench's levels; run  names what is drawn anew for every run
  Window(const Bench& bench, const Board& board, std::size_t level, const std::string& run);

  [[nodiscard]] Moment at(double t_s) const;  ///< s since the window began; ends are held
  [[nodiscard]] const Truth& truth() const { return truth_; }
  /// What reaches a meter's input, mean over its integration around t_s. Of a shunt: volts.
  [[nodiscard]] double signal(const PortPlan& port, const Meter& meter, const Wiring& wiring,
                              double t_s) const;

 private:
  [[nodiscard]] Moment moment(double load_w, double extra_loss_w, double gate) const;

  const Bench& bench_;
  Board board_;
  double ripple_w_ = 0.0;
  double step_s_ = 0.01;
  std::vector<Moment> moments_;
  Truth truth_;
};

/// The same for one port at one instant.
[[nodiscard]] double signal_of(const PortPlan& port, const Meter& meter, const Wiring& wiring,
                               const PortMoment& moment);

}  // namespace loadstair::simulation
