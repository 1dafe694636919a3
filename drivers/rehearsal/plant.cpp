#include "drivers/rehearsal/plant.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "drivers/rehearsal/chain.h"
#include "drivers/rehearsal/output_port.h"

namespace loadstair::rehearsal {

namespace {

constexpr double kSqrt2 = std::numbers::sqrt2;

// A voltage behind a resistance, after a voltmeter across it.
struct Thevenin {
  double voltage_v;
  double resistance_ohm;

  void load_with(double siemens) {
    const double share = 1.0 / (1.0 + resistance_ohm * siemens);
    voltage_v *= share;
    resistance_ohm *= share;
  }
};

}  // namespace

Plant::Plant(PlantParameters parameters)
    : parameters_{std::move(parameters)},
      nodes_{parameters_.converter.thermal, parameters_.ambient_c},
      lamps_{parameters_.lamps, parameters_.ambient_c},
      output_port_{std::make_unique<OutputPort>(parameters_.converter, parameters_.load.harmonics)} {
  last_.junction_c = last_.case_c = last_.ambient_c = parameters_.ambient_c;
}
Plant::~Plant() = default;
Plant::Plant(Plant&&) noexcept = default;
Plant& Plant::operator=(Plant&&) noexcept = default;

OutputLoad Plant::load_now() const {
  const LoadParameters& p = parameters_.load;
  OutputLoad load;
  load.conductance_s = lamps_.conductance_s(settings.lamps_on);
  const std::size_t on = std::min(static_cast<std::size_t>(std::max(settings.resistors_on, 0)),
                                  parameters_.resistors_ohm.size());
  for (std::size_t i = 0; i < on; ++i) load.conductance_s += 1.0 / parameters_.resistors_ohm[i];
  if (!settings.load_on) return load;
  const double voltage =
      std::max(load_voltage_v_, p.least_voltage_share * parameters_.converter.output.nominal_voltage_v);
  const double gain = 1.0 + p.setting_gain;
  double active = 0.0;
  switch (settings.load_mode) {
    case LoadMode::power:
      active = settings.load_power_w * gain / (voltage * voltage);
      break;
    case LoadMode::resistance:
      active = gain / std::max(settings.load_resistance_ohm, 1e-3);
      break;
    case LoadMode::current:
      active = settings.load_current_a * gain / voltage;
      break;
  }
  active = std::clamp(active, 0.0, p.greatest_current_a / voltage);
  load.conductance_s += active;
  if (parameters_.converter.kind == ConverterKind::inverter) {
    const double phase = p.displacement_deg * std::numbers::pi / 180.0;
    load.susceptance_s = active * std::tan(phase);
    load.own_siemens = active / std::cos(phase);
  }
  return load;
}

double Plant::fold_back_factor(double sensed_a) const {
  const OverloadParameters& p = parameters_.converter.overload;
  if (p.sense_ohm <= 0.0) return 1.0;
  const double trip_a = p.threshold_v / p.sense_ohm;
  if (sensed_a <= trip_a) return 1.0;
  // The limit falls with the voltage: factor * sensed = trip * (1 - k + k * factor).
  return trip_a * (1.0 - p.fold_back) / (sensed_a - trip_a * p.fold_back);
}

double Plant::loss(double output_power_w, double current_rms_a) const {
  const LossParameters& p = parameters_.converter.loss;
  const double scale_w = current_rms_a * parameters_.converter.output.nominal_voltage_v;
  const double warm = 1.0 + p.resistance_rise_per_k * (nodes_.state().junction_c - p.reference_temperature_c);
  const double nominal_v = parameters_.converter.input.nominal_voltage_v;
  const double by_input = 1.0 + p.input_voltage_effect * (last_.input.voltage[0].mean / nominal_v - 1.0);
  return (p.no_load_w + p.linear * output_power_w + p.quadratic_per_w * scale_w * scale_w * warm) * by_input;
}

void Plant::watch_input() {
  const double least_v = parameters_.converter.input.least_voltage_v;
  const double input_v = last_.input.voltage[0].mean;
  alive_ = settings.converter_on && input_v >= (alive_ ? least_v : 1.05 * least_v);
  const double rise_s = std::max(parameters_.converter.output.soft_start_s, parameters_.step_s);
  ramp_ = alive_ ? std::min(1.0, ramp_ + parameters_.step_s / rise_s) : 0.0;
}

void Plant::solve_output() {
  const OutputParameters& p = parameters_.converter.output;
  const bool ac = parameters_.converter.kind == ConverterKind::inverter;
  const OutputLoad load = load_now();
  const double residue_v = alive_ ? p.residue_share * p.nominal_voltage_v : 0.0;
  const double input_v = last_.input.voltage[0].mean;
  const double reach_v = std::max(0.0, p.greatest_modulation * input_v) / (ac ? kSqrt2 : 1.0);

  // Behind the output impedance, as far as the input voltage reaches; then what the overload circuit makes of
  // it.
  const double wanted_v = std::min(ramp_ * p.nominal_voltage_v, reach_v);
  OutputMeans means;
  last_.folded_back = false;
  if (wanted_v > 0.0) {
    const std::complex<double> siemens =
        make_chain<std::complex<double>>({load.conductance_s, ac ? -load.susceptance_s : 0.0},
                                         parameters_.output_leads, output_burden)
            .current;
    const double behind_v = wanted_v / std::abs(1.0 + p.impedance_ohm * siemens);
    const auto at = [&](double main_v) {
      return output_port_->means(main_v, residue_v, load, parameters_.output_leads, output_burden);
    };
    means = at(behind_v);
    double sensed = means.current_peak_a;
    if (ac && parameters_.converter.overload.sense == SenseKind::rms) {
      const double residue_a = means.wave.conductance_s * residue_v;
      sensed = std::sqrt(means.port.current.mean_square - residue_a * residue_a);
    }
    if (ac && parameters_.converter.overload.sense == SenseKind::average)
      sensed = means.port.current.mean_rectified;
    const double factor = fold_back_factor(sensed);
    last_.folded_back = factor < 1.0;
    if (last_.folded_back) means = at(factor * behind_v);
  }
  last_.output = means.port;
  last_.frequency_hz = ac && wanted_v > 0.0 ? p.frequency_hz : 0.0;
  last_.wave = means.wave;
  last_.load_power_w = means.load_power_w;
  load_voltage_v_ = means.load_voltage_v;
}

void Plant::solve_input() {
  const bool ac = parameters_.converter.kind == ConverterKind::inverter;
  const double slew_v = parameters_.source.slew_v_per_s * parameters_.step_s;
  const double target_v =
      settings.source_on ? settings.source_voltage_v * (1.0 + parameters_.source.setting_gain) : 0.0;
  source_voltage_v_ += std::clamp(target_v - source_voltage_v_, -slew_v, slew_v);

  const double live_w = source_voltage_v_ > 20.0 ? parameters_.converter.loss.standby_w : 0.0;
  const double fan_w = alive_ && nodes_.fan_on() ? parameters_.converter.thermal.fan_power_w : 0.0;
  const double conduction_a = std::sqrt(last_.output.current.mean_square);
  const double power_w =
      alive_ ? last_.output.power_w + loss(last_.output.power_w, conduction_a) + fan_w : live_w;

  Thevenin source{source_voltage_v_, parameters_.source.resistance_ohm + parameters_.input_leads.outer_ohm};
  source.load_with(input_burden.outer_siemens);
  source.resistance_ohm += input_burden.ammeter_ohm;
  source.load_with(input_burden.inner_siemens);
  source.resistance_ohm += parameters_.input_leads.inner_ohm;
  source.load_with(input_burden.terminals_siemens);

  // power = V I - R a^2 / 2 with the ripple's peak a = share * I: its mean product with the ripple of the
  // voltage.
  const double share = ac && alive_ ? parameters_.converter.input.ripple_share : 0.0;
  const double root_ohm = source.resistance_ohm * (1.0 + 0.5 * share * share);
  const double square = source.voltage_v * source.voltage_v - 4.0 * root_ohm * power_w;
  double current_a = 0.0;
  double voltage_v = source.voltage_v;
  if (power_w > 0.0 && square > 0.0) {
    current_a = 2.0 * power_w / (source.voltage_v + std::sqrt(square));
    voltage_v = source.voltage_v - source.resistance_ohm * current_a;
  } else if (power_w > 0.0) {
    // More than the source can give: its voltage collapses to half, and the converter lets go.
    current_a = source.voltage_v > 0.0 ? 0.5 * source.voltage_v / root_ohm : 0.0;
    voltage_v = source.voltage_v - source.resistance_ohm * current_a;
  }
  const double limit_a = parameters_.source.current_limit_a;
  if (current_a > limit_a) {
    voltage_v = std::min(power_w / limit_a, source.voltage_v);
    current_a = limit_a;
  }
  const double ripple_a = share * current_a;

  PortStep& port = last_.input;
  port = PortStep{};
  const double to_inner = parameters_.input_leads.inner_ohm;
  const double inner_a = current_a + input_burden.terminals_siemens * voltage_v;
  const double inner_v = voltage_v + to_inner * inner_a;
  const double ammeter_a = inner_a + input_burden.inner_siemens * inner_v;
  const double outer_v = inner_v + input_burden.ammeter_ohm * ammeter_a;
  const std::array<double, 3> node_v = {voltage_v, inner_v, outer_v};
  // Toward the source the ripple of the voltage shrinks with the resistance that is left.
  const double behind_ohm = parameters_.source.resistance_ohm + parameters_.input_leads.outer_ohm;
  const std::array<double, 3> left_ohm = {source.resistance_ohm, behind_ohm + input_burden.ammeter_ohm,
                                          behind_ohm};
  for (std::size_t n = 0; n < 3; ++n) {
    const double ripple_v = left_ohm[n] * ripple_a;
    port.voltage[n] = {node_v[n], node_v[n] * node_v[n] + 0.5 * ripple_v * ripple_v,
                       ripple_v * 2.0 / std::numbers::pi};
    port.meter_power_w[n] = node_v[n] * ammeter_a - 0.5 * ripple_v * ripple_a;
  }
  const double ripple_mean_a = ripple_a * 2.0 / std::numbers::pi;
  port.current = {current_a, current_a * current_a + 0.5 * ripple_a * ripple_a, ripple_mean_a};
  port.meter_current = {ammeter_a, ammeter_a * ammeter_a + 0.5 * ripple_a * ripple_a, ripple_mean_a};
  port.power_w = voltage_v * current_a - 0.5 * source.resistance_ohm * ripple_a * ripple_a;
  last_.wave.input_voltage_v = voltage_v;
  last_.wave.input_current_a = current_a;
  last_.wave.input_ripple_a = ripple_a;
  last_.wave.input_ripple_ohm = source.resistance_ohm;
  last_.loss_w = port.power_w - last_.output.power_w;
}

const PlantStep& Plant::step() {
  watch_input();
  solve_output();
  solve_input();
  const double hours = time_s() / 3600.0;
  last_.ambient_c = parameters_.ambient_c + parameters_.ambient_drift_k_per_h * hours;
  if (parameters_.ambient_swing_k != 0.0) {
    const double turns = time_s() / parameters_.ambient_swing_period_s;
    last_.ambient_c += parameters_.ambient_swing_k * std::sin(2.0 * std::numbers::pi * turns);
  }
  const double fan_w = alive_ && nodes_.fan_on() ? parameters_.converter.thermal.fan_power_w : 0.0;
  nodes_.advance(parameters_.step_s * parameters_.thermal_speed, std::max(0.0, last_.loss_w - fan_w),
                 last_.ambient_c);
  lamps_.advance(parameters_.step_s, load_voltage_v_, settings.lamps_on);
  last_.junction_c = nodes_.state().junction_c;
  last_.case_c = nodes_.state().case_c;
  last_.fan_on = nodes_.fan_on();
  last_.running = alive_;
  ++steps_;
  return last_;
}

ThermalState Plant::steady_temperatures() const {
  const double fan_w = alive_ && nodes_.fan_on() ? parameters_.converter.thermal.fan_power_w : 0.0;
  return nodes_.steady(std::max(0.0, last_.loss_w - fan_w), last_.ambient_c);
}

}  // namespace loadstair::rehearsal
