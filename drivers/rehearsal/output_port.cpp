#include "drivers/rehearsal/output_port.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <numbers>

#include "drivers/rehearsal/chain.h"

namespace loadstair::rehearsal {

namespace {

using Complex = std::complex<double>;
constexpr std::size_t kPoints = 720;

// Products written out: the library's complex product checks for infinities, and this runs twice a cycle.
double squared(Complex z) {
  return z.real() * z.real() + z.imag() * z.imag();
}
double real_power(Complex v, Complex i) {
  return v.real() * i.real() + v.imag() * i.imag();
}

Complex phasor(const Line& line) {
  return std::polar(line.share, line.phase_deg * std::numbers::pi / 180.0);
}

}  // namespace

OutputPort::OutputPort(const ConverterParameters& converter, const std::vector<Line>& own_harmonics)
    : ac_{converter.kind == ConverterKind::inverter},
      offset_share_{converter.output.dc_offset_v / converter.output.nominal_voltage_v} {
  if (!ac_) return;
  const auto line_of = [&](int order) -> MergedLine& {
    for (MergedLine& line : lines_)
      if (line.order == order) return line;
    return lines_.emplace_back(MergedLine{order, {}, {}});
  };
  for (const Line& line : converter.output.harmonics) line_of(line.order).voltage += phasor(line);
  for (const Line& line : own_harmonics) line_of(line.order).own += phasor(line);
  voltage_shape_ = shape(1.0, 1.0, 0.0);
}

OutputPort::Shape OutputPort::shape(Complex fundamental, double voltage_share, double own_share) const {
  static const std::array<double, kPoints> sine = [] {
    std::array<double, kPoints> table{};
    for (std::size_t i = 0; i < kPoints; ++i)
      table[i] = std::sin(2.0 * std::numbers::pi * static_cast<double>(i) / kPoints);
    return table;
  }();
  std::array<double, kPoints> wave{};
  const auto add = [&wave](std::size_t order, Complex rms) {
    for (std::size_t i = 0; i < kPoints; ++i) {
      const std::size_t at = order * i % kPoints;
      wave[i] +=
          std::numbers::sqrt2 * (rms.real() * sine[at] + rms.imag() * sine[(at + kPoints / 4) % kPoints]);
    }
  };
  add(1, fundamental);
  for (const MergedLine& line : lines_)
    add(static_cast<std::size_t>(line.order), voltage_share * line.voltage + own_share * line.own);
  Shape found;
  for (const double value : wave) {
    found.peak = std::max(found.peak, std::abs(value));
    found.rectified += std::abs(value) / kPoints;
  }
  return found;
}

const OutputPort::Shape& OutputPort::current_shape(Complex fundamental, double voltage_share,
                                                   double own_share) {
  constexpr double kSame = 1e-5;
  if (!cached_ || squared(fundamental - cached_fundamental_) > kSame * kSame ||
      std::abs(voltage_share - cached_voltage_share_) > kSame ||
      std::abs(own_share - cached_own_share_) > kSame) {
    current_shape_ = shape(fundamental, voltage_share, own_share);
    cached_fundamental_ = fundamental;
    cached_voltage_share_ = voltage_share;
    cached_own_share_ = own_share;
    cached_ = true;
  }
  return current_shape_;
}

OutputMeans OutputPort::means(double main_v, double residue_v, const OutputLoad& load, const PortLeads& leads,
                              const PortBurden& burden) {
  OutputMeans out;
  PortStep& port = out.port;
  double load_square = 0.0;
  const Chain<double> flat = make_chain<double>(load.conductance_s, leads, burden);
  const auto add = [&](const std::array<Complex, 3>& node, Complex through, Complex meter, Complex at_load,
                       Complex own) {
    for (std::size_t n = 0; n < 3; ++n) {
      port.voltage[n].mean_square += squared(node[n]);
      port.meter_power_w[n] += real_power(node[n], meter);
    }
    port.current.mean_square += squared(through);
    port.meter_current.mean_square += squared(meter);
    port.power_w += real_power(node[0], through);
    load_square += squared(at_load);
    out.load_power_w += load.conductance_s * squared(at_load) + real_power(at_load, own);
  };
  const auto add_flat = [&](double v) {
    add({v, flat.inner * v, flat.outer * v}, flat.current * v, flat.ammeter * v, flat.load * v, 0.0);
  };

  const double dc = ac_ ? offset_share_ * main_v : main_v;
  if (ac_ && main_v > 0.0) {
    const Chain<Complex> chain =
        make_chain<Complex>({load.conductance_s, -load.susceptance_s}, leads, burden);
    const Complex through = chain.current * main_v;
    const double current_a = std::abs(through);
    const double own_a = load.own_siemens * std::abs(chain.load) * main_v;
    const Injection own = make_injection(load.conductance_s, leads, burden);
    add({main_v, chain.inner * main_v, chain.outer * main_v}, through, chain.ammeter * main_v,
        chain.load * main_v, 0.0);
    for (const MergedLine& line : lines_) {
      const Complex v = main_v * line.voltage;
      const Complex j = own_a * line.own;
      add({v, flat.inner * v - own.inner_ohm * j, flat.outer * v - own.outer_ohm * j},
          flat.current * v + own.current * j, flat.ammeter * v + own.ammeter * j,
          flat.load * v - own.load_ohm * j, j);
    }
    // Rectified means follow the fundamental; that the shape changes along a few milliohms is left out.
    for (std::size_t n = 0; n < 3; ++n) {
      const Complex ratio = n == 0 ? Complex{1.0} : n == 1 ? chain.inner : chain.outer;
      port.voltage[n].mean_rectified = voltage_shape_.rectified * main_v * std::abs(ratio);
    }
    if (current_a > 0.0) {
      const Shape& at = current_shape(through / current_a, flat.current * main_v / current_a,
                                      own.current * own_a / current_a);
      port.current.mean_rectified = at.rectified * current_a;
      port.meter_current.mean_rectified = at.rectified * std::abs(chain.ammeter) * main_v;
      out.current_peak_a = at.peak * current_a + std::abs(flat.current * dc);
    }
    out.wave.voltage_v = main_v;
    out.wave.current_a = through;
    out.wave.own_current_a = own_a * own.current;
  } else if (!ac_) {
    out.current_peak_a = std::abs(flat.current * dc);
  }

  add_flat(dc);
  port.voltage[0].mean = dc;
  port.voltage[1].mean = flat.inner * dc;
  port.voltage[2].mean = flat.outer * dc;
  port.current.mean = flat.current * dc;
  port.meter_current.mean = flat.ammeter * dc;
  add_flat(residue_v);

  out.wave.voltage_dc_v = dc;
  out.wave.current_dc_a = port.current.mean;
  out.wave.conductance_s = flat.current;
  out.wave.residue_v = residue_v;
  out.load_voltage_v = std::sqrt(load_square);
  return out;
}

}  // namespace loadstair::rehearsal
