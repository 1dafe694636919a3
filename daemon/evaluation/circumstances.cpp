#include "daemon/evaluation/circumstances.h"

#include <chrono>

#include "analysis/base/number.h"
#include "analysis/series/statistics.h"

namespace loadstair::evaluation {
namespace {

constexpr double kDayNs = 86400e9;

const PortResult* port_of(const StepResult& result, const setup::Hookup& hookup, const std::string& channel) {
  for (std::size_t i = 0; i < hookup.ports.size() && i < result.ports.size(); ++i) {
    const setup::Port& port = hookup.ports[i];
    for (const std::string* name : {&port.voltage, &port.current, &port.power, &port.power_factor}) {
      if (*name == channel) return &result.ports[i];
    }
  }
  return nullptr;
}

/// Of the port that the channel belongs to: its capture's, else the frequency that was measured or rated,
/// which are the output's. Nullopt on DC, and where nobody knows.
std::optional<double> frequency_at(const StepValues& values, const std::string& channel,
                                   const setup::Stair& stair, const StepResult& result) {
  const PortResult* found = port_of(result, *values.hookup, channel);
  const setup::Port* port = found == nullptr ? nullptr : values.hookup->find_port(found->name);
  if (port == nullptr || port->kind != setup::PortKind::ac) return std::nullopt;
  const CaptureAnalysis* capture = capture_of(values.captures, port->name);
  if (capture != nullptr && capture->result && capture->result->fundamental)
    return capture->result->fundamental->fitted_hz;
  if (port->direction != setup::Direction::output) return std::nullopt;
  if (result.frequency.known) return result.frequency.value;
  if (stair.ratings.output_frequency_hz > 0.0) return stair.ratings.output_frequency_hz;
  return std::nullopt;
}

bool sees_dc_only(const setup::Channel& channel) {
  const bool electrical =
      channel.quantity == setup::Quantity::voltage || channel.quantity == setup::Quantity::current;
  return electrical && channel.response == setup::Response::dc;
}

}  // namespace

double ambient_of(const setup::Hookup& hookup, const setup::Stair& stair, const std::vector<Track>& tracks,
                  double from_s, double to_s) {
  for (const setup::TemperaturePoint& point : hookup.temperatures) {
    for (const Track& track : tracks) {
      if (track.channel == nullptr || point.ambient_channel.empty() ||
          track.channel->name != point.ambient_channel)
        continue;
      const Stretch part = stretch(track, from_s, to_s);
      if (part.size() == 0) continue;
      series::CompensatedSum sum;
      for (std::size_t i = part.first; i < part.last; ++i) sum.add(track.value[i]);
      return sum.total() / static_cast<double>(part.size());
    }
  }
  return stair.ambient_c;
}

std::optional<double> days_since(const std::string& date, std::int64_t t_ns) {
  if (date.size() < 10 || date[4] != '-' || date[7] != '-') return std::nullopt;
  const auto year = base::parse_integer(date.substr(0, 4));
  const auto month = base::parse_integer(date.substr(5, 2));
  const auto day = base::parse_integer(date.substr(8, 2));
  if (!year || !month || !day) return std::nullopt;
  const std::chrono::year_month_day then{std::chrono::year{static_cast<int>(*year)},
                                         std::chrono::month{static_cast<unsigned>(*month)},
                                         std::chrono::day{static_cast<unsigned>(*day)}};
  if (!then.ok()) return std::nullopt;
  const auto then_days = static_cast<double>(std::chrono::sys_days{then}.time_since_epoch().count());
  const double days = static_cast<double>(t_ns) / kDayNs - then_days;
  return days >= 0.0 ? std::optional{days} : std::nullopt;
}

estimate::SpecificationConditions conditions_of(const setup::Channel& channel, int range) {
  const setup::Conditions& declared = channel.conditions;
  estimate::SpecificationConditions out;
  out.reference_low_c = declared.low_c;
  out.reference_high_c = declared.high_c;
  out.most_days = declared.days;
  out.least_percent_of_range = declared.least_percent_of_range;
  if (!sees_dc_only(channel)) {
    out.band_low_hz = declared.least_hz;
    out.band_high_hz = channel.band_hz;
  }
  out.least_power_factor = declared.least_power_factor;
  if (!declared.percent_of_spec_per_k || range == kNoRange) return out;
  const setup::RangeSpec& spec = channel.ranges[static_cast<std::size_t>(range)];
  const double share = *declared.percent_of_spec_per_k / 100.0;
  const double digits_percent = spec.upto > 0.0 ? 100.0 * spec.digits * spec.resolution / spec.upto : 0.0;
  out.reading_percent_per_k = share * spec.reading_percent;
  out.range_percent_per_k = share * (spec.range_percent + digits_percent);
  return out;
}

std::vector<std::string> condition_remarks(const StepValues& values, const setup::Stair& stair,
                                           const StepResult& result) {
  std::vector<std::string> remarks;
  for (const ChannelValue& value : values.channels) {
    if (!value.plain || value.parts.empty()) continue;
    const setup::RangeSpec* spec = value.range();
    const int range = spec == nullptr ? kNoRange : static_cast<int>(spec - value.channel->ranges.data());
    estimate::Conditions actual = value.conditions;
    actual.frequency_hz = frequency_at(values, value.channel->name, stair, result);
    const PortResult* port = port_of(result, *values.hookup, value.channel->name);
    if (port != nullptr && port->power_factor.known) actual.power_factor = port->power_factor.value;
    const auto found = estimate::judge_conditions(value.raw, meter_range(*value.channel, range),
                                                  conditions_of(*value.channel, range), actual);
    const std::string left = found.allowed_for ? "" : "; its uncertainty is left as specified";
    for (const std::string& text : found.violated)
      remarks.push_back(value.channel->name + ": " + text + left);
    for (const std::string& what : found.not_checked)
      remarks.push_back(value.channel->name + ": its accuracy depends on the " + what +
                        ", which is not known here");
  }
  return remarks;
}

}  // namespace loadstair::evaluation
