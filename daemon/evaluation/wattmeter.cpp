#include "daemon/evaluation/wattmeter.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <utility>

#include "daemon/evaluation/bench_checks.h"

namespace loadstair::evaluation {
namespace {

using estimate::Estimate;

ChannelValue* value_of(StepValues& values, const std::string& channel) {
  for (ChannelValue& value : values.channels) {
    if (!channel.empty() && value.channel->name == channel) return &value;
  }
  return nullptr;
}

const std::string& meter_of(const ChannelValue& value) {
  const setup::Channel& channel = *value.channel;
  return channel.typed ? (channel.meter.empty() ? channel.name : channel.meter) : channel.instrument;
}

/// Read on one declared range, and nothing but the specification stands for its error.
bool plain_specification(const ChannelValue* value, const WindowContext& context) {
  if (value == nullptr || !value->value || value->parts.size() != 1) return false;
  if (value->parts.front().range == kNoRange) return false;
  if (context.checks == nullptr) return true;
  const std::string& name = value->channel->name;
  return context.checks->zero_of(name) == nullptr && context.checks->tie_of(name) == nullptr;
}

double phase_rad(const ChannelValue& power) {
  return power.channel->phase_error_deg.value_or(0.0) * std::numbers::pi / 180.0;
}

/// P tan(phi) u(phi), from what volts and amperes and watts say of phi.
void add_phase(ChannelValue& power, double apparent_va) {
  const double limit_rad = phase_rad(power);
  if (!(limit_rad > 0.0) || !power.plain) return;
  const double watt = power.plain->value();
  const double reactive = std::sqrt(std::max(0.0, apparent_va * apparent_va - watt * watt));
  const int range = power.parts.empty() ? kNoRange : power.parts.front().range;
  estimate::Source source;
  source.owner = meter_range(*power.channel, range).meter;
  source.key = estimate::key::meter(source.owner, "phase");
  source.name = source.owner.instrument + " " + source.owner.function + ": phase";
  source.distribution = estimate::Distribution::rectangular;
  source.remedy = estimate::Remedy::capture;
  source.variance_left = 0.0;
  const Estimate error{0.0, estimate::make_source(std::move(source)),
                       reactive * limit_rad / std::numbers::sqrt3};
  power.plain = *power.plain + error;
  if (power.value) power.value = *power.value + error;
}

/// The three of them with their common sources; false where the specification refuses it.
bool share(StepValues& values, ChannelValue& voltage, ChannelValue& current, ChannelValue& power) {
  const setup::Hookup& hookup = *values.hookup;
  const MeterNow volt = meter_now(voltage, voltage.parts.front(), hookup);
  const MeterNow ampere = meter_now(current, current.parts.front(), hookup);
  const MeterNow watt = meter_now(power, power.parts.front(), hookup);
  // Raw values times their scales are volts, amperes and watts; the phase is known of these.
  const auto quoted =
      estimate::with_wattmeter_error({.voltage = voltage.raw,
                                      .current = current.raw,
                                      .active_power = power.raw,
                                      .voltage_range = volt.meter,
                                      .current_range = ampere.meter,
                                      .power_range = watt.meter,
                                      .phase_limit_rad = 0.0},
                                     occasion_of(values.context, *power.channel), watt.shares);
  if (!quoted) return false;
  attach_meter_error(voltage, quoted->voltage);
  attach_meter_error(current, quoted->current);
  attach_meter_error(power, quoted->active_power);
  return true;
}

}  // namespace

void share_wattmeters(StepValues& values) {
  for (const setup::Port& port : values.hookup->ports) {
    ChannelValue* power = value_of(values, port.power);
    if (power == nullptr || port.kind != setup::PortKind::ac) continue;
    ChannelValue* voltage = value_of(values, port.voltage);
    ChannelValue* current = value_of(values, port.current);
    const bool both = voltage != nullptr && current != nullptr && voltage->plain && current->plain;
    const double apparent_va = both ? std::abs(voltage->plain->value() * current->plain->value()) : 0.0;
    const bool sharing = plain_specification(voltage, values.context) &&
                         plain_specification(current, values.context) &&
                         plain_specification(power, values.context) &&
                         power->channel->response == setup::Response::wattmeter &&
                         meter_of(*voltage) == meter_of(*power) && meter_of(*current) == meter_of(*power);
    if (sharing) {
      UnsharedPower unshared{port.name, *voltage->value * *current->value, *power->value};
      if (share(values, *voltage, *current, *power)) values.unshared.push_back(std::move(unshared));
    }
    if (both) {
      add_phase(*power, apparent_va);
    } else if (phase_rad(*power) > 0.0) {
      power->remarks.push_back(power->channel->name +
                               ": its phase error needs the port's voltage and current, and is left out");
    }
  }
}

}  // namespace loadstair::evaluation
