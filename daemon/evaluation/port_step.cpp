#include "daemon/evaluation/port_step.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <optional>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/series/align.h"
#include "daemon/evaluation/port_series.h"

namespace loadstair::evaluation {
namespace {

using efficiency::PortReading;
using efficiency::Resistance;
using estimate::Distribution;
using estimate::Estimate;
using estimate::Quoted;

std::optional<Resistance> burden_of(const ChannelValue* value) {
  if (value == nullptr) return std::nullopt;
  const setup::RangeSpec* range = value->range();
  const setup::Channel& channel = *value->channel;
  const int index = range == nullptr ? kNoRange : static_cast<int>(range - channel.ranges.data());
  const auto& shunt = channel.conversion.shunt;
  if (shunt) {
    const double past_it =
        range != nullptr && range->impedance_ohm > 0.0 ? shunt->resistance_ohm / range->impedance_ohm : 0.0;
    return Resistance{burden_name(channel, index), shunt->resistance_ohm / (1.0 + past_it),
                      shunt->tolerance_percent / 100.0};
  }
  if (range == nullptr || range->impedance_ohm == 0.0) return std::nullopt;
  Resistance burden{burden_name(channel, index), range->impedance_ohm, std::nullopt};
  if (range->impedance_tolerance_percent) burden.tolerance = *range->impedance_tolerance_percent / 100.0;
  return burden;
}

efficiency::Port port_of(const setup::Port& declared, const StepValues& values) {
  efficiency::Port port;
  port.name = declared.name;
  const bool input = declared.direction == setup::Direction::input;
  if (declared.counted) {
    port.role = input ? efficiency::Role::input : efficiency::Role::output;
  } else {
    port.role = input ? efficiency::Role::auxiliary_input : efficiency::Role::auxiliary_output;
  }
  port.counted = declared.counted;
  port.current = declared.kind == setup::PortKind::dc ? efficiency::Current::dc : efficiency::Current::ac;
  port.voltmeter = declared.voltmeter == setup::VoltmeterSide::converter
                       ? efficiency::VoltmeterPosition::converter_side
                       : efficiency::VoltmeterPosition::outer_side;
  if (declared.sensed) {
    port.sensing =
        *declared.sensed ? efficiency::Sensing::at_terminals : efficiency::Sensing::not_at_terminals;
  }
  if (declared.lead_resistance_ohm) {
    port.lead = Resistance{"leads of " + declared.name, *declared.lead_resistance_ohm,
                           declared.lead_tolerance_percent / 100.0};
  }
  port.ammeter = burden_of(values.find(declared.current));
  port.voltmeter_impedance = burden_of(values.find(declared.voltage));
  return port;
}

enum class Noise { in_readings, on_its_own };

/// An average-responding meter shows the RMS of a sine; other shapes need their form factor.
Quoted corrected_for_form(const Quoted& quoted, const ChannelValue& value, const setup::Port& port,
                          const StepValues& values, bool plain) {
  if (!quoted || value.channel->response != setup::Response::average_responding ||
      port.kind != setup::PortKind::ac) {
    return quoted;
  }
  const CaptureAnalysis* capture = capture_of(values.captures, port.name);
  if (capture != nullptr && capture->result) {
    const auto& place =
        value.channel->quantity == setup::Quantity::voltage ? capture->voltage : capture->current;
    if (place) {
      const Quoted& form = capture->quote.channels[*place].form_factor;
      if (form) return efficiency::rms_from_average_responding(*quoted, *form);
    }
  }
  if (plain) return quoted;
  return base::Refusal{
      value.channel->name,
      "uncertainty not known: an average-responding meter reads right on a sine only, and no capture "
      "gives the form factor"};
}

/// The meter on a shunt takes a part of the current past it: R / R_meter of what goes through the shunt.
Quoted with_meter_current(const Quoted& quoted, const ChannelValue& value) {
  const setup::RangeSpec* range = value.range();
  const auto& shunt = value.channel->conversion.shunt;
  if (!quoted || !shunt || range == nullptr || range->impedance_ohm == 0.0) return quoted;
  Resistance meter{"meter on the shunt of " + value.channel->name, range->impedance_ohm, std::nullopt};
  if (range->impedance_tolerance_percent) meter.tolerance = *range->impedance_tolerance_percent / 100.0;
  return *quoted * (1.0 + shunt->resistance_ohm / efficiency::resistance_estimate(meter));
}

std::optional<Quoted> reading_of(const std::string& channel, const setup::Port& port,
                                 const StepValues& values, bool plain, Noise noise) {
  if (channel.empty()) return std::nullopt;
  const ChannelValue* value = values.find(channel);
  if (value == nullptr) return Quoted{base::Refusal{channel, "the hook-up file has no such channel"}};
  Quoted quoted = plain ? value->plain : value->value;
  if (quoted && !plain && noise == Noise::in_readings) quoted = value->with_noise(values.context);
  return corrected_for_form(with_meter_current(quoted, *value), *value, port, values, plain);
}

/// Between the readings a port may fluctuate in step, or against it: a bound of the window's own.
Estimate fluctuation_of(const setup::Port& port, const StepValues& values, double most_w) {
  estimate::Source source;
  source.name = "fluctuation between readings of " + port.name;
  source.key = estimate::key::window(values.context.run, values.context.step, source.name);
  source.distribution = Distribution::rectangular;
  return estimate::bounded(-most_w, most_w, estimate::make_source(std::move(source)));
}

/// What the product of two means leaves out on a DC port: ripple, and fluctuation faster than the readings.
std::optional<Estimate> ripple_of(const setup::Port& port, const StepValues& values) {
  std::optional<Estimate> ripple;
  const CaptureAnalysis* capture = capture_of(values.captures, port.name);
  if (capture != nullptr && capture->quote.power.ripple_w) {
    ripple = *capture->quote.power.ripple_w;
  } else if (port.ripple_current_rms_a && port.source_resistance_ohm) {
    const Quoted bound = efficiency::ripple_bound(port_of(port, values), *port.ripple_current_rms_a,
                                                  *port.source_resistance_ohm, values.context.run);
    if (bound) ripple = *bound;
  }
  const ChannelValue* voltage = values.find(port.voltage);
  const ChannelValue* current = values.find(port.current);
  if (voltage != nullptr && current != nullptr) {
    const double most_w = series::fluctuation_bound(voltage->deviation, current->deviation);
    if (most_w > 0.0) {
      const Estimate fluctuation = fluctuation_of(port, values, most_w);
      ripple = ripple ? *ripple + fluctuation : fluctuation;
    }
  }
  return ripple;
}

std::optional<Quoted> power_factor_of(const setup::Port& port, const StepValues& values, bool plain,
                                      Noise noise) {
  const CaptureAnalysis* capture = capture_of(values.captures, port.name);
  if (capture != nullptr && capture->quote.power.power_factor) return capture->quote.power.power_factor;
  if (!port.power_factor.empty()) return reading_of(port.power_factor, port, values, plain, noise);
  if (port.power_factor_low) {
    const std::string name = "power factor of " + port.name + ", as declared";
    estimate::Source source;
    source.key = estimate::key::component(port.name, "declared power factor");
    source.name = name;
    source.distribution = Distribution::rectangular;
    source.remedy = estimate::Remedy::capture;
    source.variance_left = 0.0;
    return Quoted{estimate::bounded(*port.power_factor_low, 1.0, estimate::make_source(std::move(source)))};
  }
  return std::nullopt;
}

PortReading reading_of(const setup::Port& port, const StepValues& values, bool plain, Noise noise) {
  PortReading reading;
  reading.voltage = reading_of(port.voltage, port, values, plain, noise);
  reading.current = reading_of(port.current, port, values, plain, noise);
  reading.power = reading_of(port.power, port, values, plain, noise);
  if (port.kind == setup::PortKind::dc) {
    reading.ripple_power = ripple_of(port, values);
    return reading;
  }
  const CaptureAnalysis* capture = capture_of(values.captures, port.name);
  // Of a capture without declared accuracy nothing enters an efficiency.
  if (capture != nullptr && capture->quote.power.active_w)
    reading.capture_power = capture->quote.power.active_w;
  reading.power_factor = power_factor_of(port, values, plain, noise);
  for (const UnsharedPower& one : values.unshared) {
    if (one.port == port.name && reading.power_factor && *reading.power_factor)
      reading.product_less_power = one.volt_ampere * **reading.power_factor - one.watt;
  }
  return reading;
}

efficiency::StepInput input_of(const StepValues& values, bool plain, Noise noise) {
  efficiency::StepInput input;
  input.label = values.context.step;
  for (const setup::Port& port : values.hookup->ports) {
    input.ports.push_back(port_of(port, values));
    input.readings.push_back(reading_of(port, values, plain, noise));
  }
  return input;
}

}  // namespace

const ChannelValue* StepValues::find(const std::string& channel) const {
  if (channel.empty()) return nullptr;
  for (const ChannelValue& value : channels) {
    if (value.channel->name == channel) return &value;
  }
  return nullptr;
}

StepPowers step_powers(const StepValues& values, bool plain) {
  StepPowers powers;
  powers.input = input_of(values, plain, Noise::in_readings);
  powers.ports = efficiency::step_result(powers.input);
  const bool measured = powers.ports.input_power.ok() && powers.ports.output_power.ok();
  std::optional<efficiency::StepNoise> noise;
  if (measured && !plain) noise = noise_of(values, powers.ports);
  if (!noise) {
    powers.totals = powers.ports;
    return powers;
  }
  powers.input = input_of(values, plain, Noise::on_its_own);
  powers.input.noise = std::move(noise);
  powers.totals = efficiency::step_result(powers.input);
  return powers;
}

std::string unknown_of(const StepValues& values) {
  std::string text;
  for (const setup::Port& port : values.hookup->ports) {
    for (const std::string* name : {&port.voltage, &port.current, &port.power, &port.power_factor}) {
      const ChannelValue* value = values.find(*name);
      if (value == nullptr) continue;
      const bool average = value->channel->response == setup::Response::average_responding;
      if (!value->unknown.empty()) {
        text += (text.empty() ? "" : "; ") + value->unknown;
      } else if (average && port.kind == setup::PortKind::ac && value->value &&
                 !corrected_for_form(value->value, *value, port, values, false)) {
        text += (text.empty() ? "" : "; ") +
                corrected_for_form(value->value, *value, port, values, false).refusal().text();
      }
    }
  }
  return text;
}

}  // namespace loadstair::evaluation
