// A channel's declared accuracy as analysis takes it.
#include <algorithm>

#include "analysis/base/number.h"
#include "daemon/evaluation/channel_value.h"

namespace loadstair::evaluation {
namespace {

std::string_view quantity_name(const setup::Channel& channel) {
  switch (channel.quantity) {
    case setup::Quantity::voltage:
      return channel.response == setup::Response::dc ? "dc voltage" : "ac voltage";
    case setup::Quantity::current:
      return channel.response == setup::Response::dc ? "dc current" : "ac current";
    case setup::Quantity::power:
      return "active power";
    case setup::Quantity::apparent_power:
      return "apparent power";
    case setup::Quantity::power_factor:
      return "power factor";
    case setup::Quantity::frequency:
      return "frequency";
    case setup::Quantity::temperature:
      return "temperature";
  }
  return "";
}

bool resistive(const setup::Channel& channel) {
  return channel.conversion.platinum || channel.conversion.thermistor;
}

/// What the meter itself measures: volts or ohms, where a sensor makes another quantity of them.
std::string_view meter_unit(const setup::Channel& channel) {
  if (channel.conversion.shunt) return "V";
  if (resistive(channel)) return "ohm";
  if (channel.conversion.thermocouple && !channel.conversion.thermocouple->cold_junction.empty()) return "V";
  return channel.unit;
}

std::string function_of(const setup::Channel& channel) {
  std::string function{quantity_name(channel)};
  if (channel.conversion.shunt) function = "dc voltage";
  if (resistive(channel)) function = "resistance";
  // A meter has several inputs of one quantity only if its values have names of their own.
  const bool plain = channel.value.empty() || channel.value == "reading" ||
                     function.find(channel.value) != std::string::npos;
  return plain ? function : function + " " + channel.value;
}

}  // namespace

estimate::MeterRange meter_range(const setup::Channel& channel, int range) {
  estimate::MeterRange meter;
  meter.meter.instrument = channel.instrument;
  if (channel.typed) meter.meter.instrument = channel.meter.empty() ? channel.name : channel.meter;
  meter.meter.function = function_of(channel);
  if (range == kNoRange) return meter;
  const setup::RangeSpec& spec = channel.ranges[static_cast<std::size_t>(range)];
  meter.meter.range = base::print_number(spec.upto) + " " + std::string{meter_unit(channel)};
  meter.range = spec.upto;
  meter.digit = spec.resolution;
  meter.accuracy = estimate::AccuracySpec{.percent_of_reading = spec.reading_percent,
                                          .percent_of_range = spec.range_percent,
                                          .digits = spec.digits};
  return meter;
}

estimate::Occasion occasion_of(const WindowContext& context, const setup::Channel& channel) {
  return {context.run, context.step + ", " + channel.name};
}

estimate::Shares shares_of(const setup::Hookup& hookup, const setup::Channel& channel, int range) {
  const auto declared = hookup.repeatability_percent.find(channel.name);
  if (declared == hookup.repeatability_percent.end() || range == kNoRange) return {};
  const double specified = channel.ranges[static_cast<std::size_t>(range)].reading_percent;
  if (!(specified > 0.0)) return {};
  const double ratio = declared->second / specified;
  const double unshared = std::min(1.0, ratio * ratio);
  return {1.0 - unshared, unshared / 2.0, unshared / 2.0};
}

std::string burden_name(const setup::Channel& channel, int range) {
  if (channel.conversion.shunt) return "shunt of " + channel.name;
  const estimate::Owner owner = meter_range(channel, range).meter;
  return owner.instrument + (owner.range.empty() ? "" : " on " + owner.range) + ": burden";
}

double correlation_of(const setup::Hookup& hookup, const setup::Channel& channel) {
  const setup::Instrument* instrument = hookup.find_instrument(channel.instrument);
  return instrument == nullptr ? 0.0 : std::max(instrument->integration_s, instrument->update_s);
}

}  // namespace loadstair::evaluation
