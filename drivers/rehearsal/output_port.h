// The converter's output as phasors: from a terminal voltage and a load to the means of one step.
#pragma once

#include <complex>
#include <cstddef>
#include <vector>

#include "drivers/rehearsal/plant.h"

namespace loadstair::rehearsal {

/// What hangs on the far end of the output's leads.
struct OutputLoad {
  double conductance_s = 0.0;  ///< to every line of the spectrum
  double susceptance_s = 0.0;  ///< lagging, to the fundamental
  double own_siemens = 0.0;    ///< scale of its own harmonics, over the fundamental at the load
};

struct OutputMeans {
  PortStep port;
  WaveStep wave;
  double load_power_w = 0.0;
  double load_voltage_v = 0.0;  ///< rms at the load
  double current_peak_a = 0.0;  ///< without switching residue, which the overload circuit filters out
};

class OutputPort {
 public:
  OutputPort(const ConverterParameters& converter, const std::vector<Line>& own_harmonics);

  /// `main_v`: fundamental rms at the terminals (inverter), or their DC voltage (dcdc); lines and offset are
  /// in proportion to it. `residue_v`: rms of the switching residue.
  [[nodiscard]] OutputMeans means(double main_v, double residue_v, const OutputLoad& load,
                                  const PortLeads& leads, const PortBurden& burden);

 private:
  struct MergedLine {
    int order = 1;
    std::complex<double> voltage;  ///< over the fundamental voltage
    std::complex<double> own;      ///< over the scale of the load's own current
  };
  /// Peak and rectified mean of a waveform over its fundamental's rms.
  struct Shape {
    double peak = 0.0;
    double rectified = 0.0;
  };
  [[nodiscard]] Shape shape(std::complex<double> fundamental, double voltage_share, double own_share) const;
  [[nodiscard]] const Shape& current_shape(std::complex<double> fundamental, double voltage_share,
                                           double own_share);

  bool ac_;
  double offset_share_;
  std::vector<MergedLine> lines_;
  Shape voltage_shape_;
  Shape current_shape_;
  bool cached_ = false;
  std::complex<double> cached_fundamental_;
  double cached_voltage_share_ = 0.0;
  double cached_own_share_ = 0.0;
};

}  // namespace loadstair::rehearsal
