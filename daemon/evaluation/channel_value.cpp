#include "daemon/evaluation/channel_value.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/estimate/sharing.h"
#include "analysis/sensors/quoted.h"
#include "analysis/series/statistics.h"
#include "daemon/evaluation/bench_checks.h"
#include "daemon/evaluation/circumstances.h"
#include "daemon/evaluation/live.h"
#include "daemon/evaluation/sensor_of.h"
#include "daemon/evaluation/typed_value.h"

namespace loadstair::evaluation {
namespace {

using estimate::Distribution;
using estimate::Estimate;
using estimate::Quoted;

constexpr double kRoomDegc = 23.0;

Estimate half_width(double value, estimate::SourcePtr source) {
  return Estimate{0.0, std::move(source), value / std::numbers::sqrt3};
}

estimate::SourcePtr component(const std::string& name, const std::string& part,
                              estimate::Remedy remedy = estimate::Remedy::none) {
  estimate::Source source;
  source.key = estimate::key::component(name, part);
  source.name = name + ": " + part;
  source.distribution = Distribution::rectangular;
  source.owner.instrument = name;
  source.remedy = remedy;
  return estimate::make_source(std::move(source));
}

void sort_into_ranges(ChannelValue& into) {
  const Track& track = *into.stretch.track;
  std::vector<series::CompensatedSum> sums;
  std::vector<std::size_t> counts;
  series::CompensatedSum all;
  for (std::size_t i = into.stretch.first; i < into.stretch.last; ++i) {
    all.add(track.raw[i]);
    auto part = std::find_if(into.parts.begin(), into.parts.end(),
                             [&](const RangePart& one) { return one.range == track.range[i]; });
    if (part == into.parts.end()) {
      into.parts.push_back({track.range[i], 0.0, 0.0});
      sums.emplace_back();
      counts.push_back(0);
      part = into.parts.end() - 1;
    }
    const auto at = static_cast<std::size_t>(part - into.parts.begin());
    sums[at].add(track.raw[i]);
    ++counts[at];
  }
  const auto total = static_cast<double>(into.stretch.size());
  into.raw = all.total() / total;
  for (std::size_t i = 0; i < into.parts.size(); ++i) {
    into.parts[i].share = static_cast<double>(counts[i]) / total;
    into.parts[i].raw = sums[i].total() / static_cast<double>(counts[i]);
  }
}

/// The conversion's own errors around `quoted`; what is not known of them is told.
Estimate own_errors(ChannelValue& of, const Quoted& quoted, const std::string& name) {
  if (quoted) return quoted->with_value(0.0);
  of.unknown = name + ": " + quoted.refusal().reason;
  return Estimate{0.0};
}

Estimate shunt_error(ChannelValue& of, double volt) {
  const setup::Shunt& declared = *of.channel->conversion.shunt;
  const sensors::Shunt shunt = shunt_of(declared);
  const auto current = sensors::shunt_current(shunt, volt, declared.ambient_c);
  if (!current) return Estimate{0.0};
  of.sensitivity *= current->per_volt_a;
  sensors::ShuntErrors errors;
  errors.tolerance_percent = declared.tolerance_percent;
  errors.ambient_degc = declared.ambient_c;
  if (declared.ambient_tolerance_k) errors.ambient_tolerance_k = *declared.ambient_tolerance_k;
  // One name with the burden that the shunt is to the circuit: one resistor, one source.
  const std::string name = burden_name(*of.channel, kNoRange);
  return own_errors(of, sensors::quoted_shunt(shunt, errors, Estimate{volt}, name), name);
}

Estimate thermocouple_error(ChannelValue& of, double emf_v) {
  const setup::Thermocouple& couple = *of.channel->conversion.thermocouple;
  const auto type = thermocouple_of(couple);
  if (!type) return Estimate{0.0};
  Estimate sum{0.0};
  if (!couple.cold_junction.empty()) {
    const double cold_degc = of.cold_junction ? of.cold_junction->value() : kRoomDegc;
    if (const auto junction = sensors::thermocouple_temperature(*type, emf_v, cold_degc)) {
      of.sensitivity *= junction->per_emf_k_per_v;
      if (of.cold_junction) sum = sum + junction->per_cold_junction * of.cold_junction->with_value(0.0);
    }
    if (!of.cold_junction) of.unknown = "its cold junction's uncertainty is not known";
  }
  const auto tolerance = sensors::thermocouple_tolerance_k(*type, couple.tolerance_class, of.middle);
  const std::string name = "thermocouple of " + of.channel->name;
  if (tolerance) return sum + half_width(*tolerance, component(name, "tolerance class"));
  of.unknown = name + ": " + tolerance.refusal().reason;
  return sum;
}

Estimate platinum_error(ChannelValue& of, double ohm) {
  const setup::Platinum& platinum = *of.channel->conversion.platinum;
  if (const auto found = platinum_temperature(platinum, ohm)) of.sensitivity *= found->sensitivity;
  const std::string name = "platinum thermometer of " + of.channel->name;
  const auto tolerance_class = sensors::parse_platinum_class(platinum.tolerance_class);
  if (!tolerance_class) return own_errors(of, tolerance_class.refusal(), name);
  const sensors::PlatinumSensor sensor{
      .r0_ohm = platinum.r0_ohm,
      .tolerance_class = *tolerance_class,
      .build = platinum.film ? sensors::PlatinumBuild::film : sensors::PlatinumBuild::wire_wound,
      .lead_ohm = platinum.lead_ohm};
  return own_errors(of, sensors::quoted_platinum(sensor, Estimate{ohm}, name), name);
}

Estimate thermistor_error(ChannelValue& of, double ohm) {
  const setup::Thermistor& thermistor = *of.channel->conversion.thermistor;
  if (const auto found = thermistor_temperature(thermistor, ohm)) of.sensitivity *= found->sensitivity;
  const std::string name = "thermistor of " + of.channel->name;
  if (thermistor.tolerance_k) return half_width(*thermistor.tolerance_k, component(name, "tolerance"));
  of.unknown = name + ": its tolerance is not declared";
  return Estimate{0.0};
}

/// d value / d raw at the mean, and the errors of what converts.
Estimate conversion_error(ChannelValue& of) {
  const setup::Conversion& conversion = of.channel->conversion;
  const double scaled = of.raw * conversion.scale;
  Estimate sum{0.0};
  of.sensitivity = conversion.scale;
  if (conversion.shunt) sum = shunt_error(of, scaled);
  if (conversion.thermocouple) sum = thermocouple_error(of, scaled);
  if (conversion.platinum) sum = platinum_error(of, scaled);
  if (conversion.thermistor) sum = thermistor_error(of, scaled);
  if (conversion.scale_tolerance_percent > 0.0) {
    const double error = of.sensitivity * of.raw * conversion.scale_tolerance_percent / 100.0;
    sum = sum + half_width(error, component("scale of " + of.channel->name, "ratio"));
  }
  return sum;
}

/// The meter's instants are known within a half-width only: all of one instrument's lie off together.
Estimate timing_error(const ChannelValue& of, const WindowContext& context) {
  if (!of.window || of.window->slope_per_s == 0.0) return Estimate{0.0};
  const Track& track = *of.stretch.track;
  double half_width_s = 0.0;
  for (std::size_t i = of.stretch.first; i < of.stretch.last; ++i) half_width_s += track.half_width_s[i];
  half_width_s /= static_cast<double>(of.stretch.size());
  const std::string& instrument = of.channel->instrument;
  return half_width(
      of.window->slope_per_s * half_width_s,
      estimate::make_type_b(estimate::key::window(context.run, context.step, "instants of " + instrument),
                            "instants of " + instrument + " while the step drifts", Distribution::rectangular,
                            {instrument, "", ""}));
}

std::string why_nothing(const Track& track, const WindowContext& context) {
  std::size_t count = 0;
  std::string reason;
  for (const Track::Unusable& one : track.unusable) {
    if (one.time_s < context.from_s || one.time_s > context.to_s) continue;
    ++count;
    reason = one.reason;
  }
  if (count == 0)
    return track.index < 0 ? "the run has no such channel" : "no reading that lies wholly in the window";
  return "no good reading in the window (" + base::print_integer(static_cast<std::int64_t>(count)) +
         " not used, the last one since " + reason + ")";
}

void remark_unusable(ChannelValue& into, const WindowContext& context) {
  std::size_t count = 0;
  std::string reason;
  for (const Track::Unusable& one : into.stretch.track->unusable) {
    if (one.time_s < context.from_s || one.time_s > context.to_s) continue;
    ++count;
    reason = one.reason;
  }
  if (count == 0) return;
  into.remarks.push_back(into.channel->name + ": " + base::print_integer(static_cast<std::int64_t>(count)) +
                         " of " +
                         base::print_integer(static_cast<std::int64_t>(count + into.stretch.size())) +
                         " readings not used, the last one since " + reason);
}

/// How long readings hang together, from the whole stretch since the step has settled: a window alone is
/// short for that. Nullopt where the stretch is hardly longer than the window.
std::optional<double> stretch_correlation(const Track& track, const Stretch& window, double declared_s,
                                          const WindowContext& context) {
  const Stretch steady = steady_stretch(track, context);
  if (!longer_than(steady, window)) return std::nullopt;
  const auto found = series::steady_window(steady.values(), {.declared_correlation_s = declared_s});
  return found ? std::optional{found->correlation_time_s} : std::nullopt;
}

void fill_linked(ChannelValue& into, const setup::Hookup& hookup, const Track& track,
                 const WindowContext& context) {
  const setup::Instrument* instrument = hookup.find_instrument(into.channel->instrument);
  into.stretch = whole_within(track, context.from_s, context.to_s,
                              instrument == nullptr ? 0.0 : instrument->integration_s);
  if (into.stretch.size() == 0) {
    into.value = into.plain = base::Refusal{into.channel->name, why_nothing(track, context)};
    return;
  }
  remark_unusable(into, context);
  const double declared_s = correlation_of(hookup, *into.channel);
  auto window = series::steady_window(into.stretch.values(), {.declared_correlation_s = declared_s,
                                                              .stretch_correlation_s = stretch_correlation(
                                                                  track, into.stretch, declared_s, context)});
  if (!window) {
    into.value = into.plain = base::Refusal{into.channel->name, window.refusal().reason};
    return;
  }
  into.window = *std::move(window);
  into.deviation = std::hypot(into.window->deviation, into.window->drift_u);
  sort_into_ranges(into);
  if (into.parts.size() > 1)
    into.remarks.push_back(into.channel->name + ": the meter changed its range in the window");
  // Every channel's line is read off at the middle of the step's window: one instant for all of them.
  into.middle = into.window->value + into.window->slope_per_s * (context.middle_s() - into.window->middle_s);
  into.own = timing_error(into, context);
  attach_meter_error(into, meter_error(into, hookup, context));
}

}  // namespace

Stretch steady_stretch(const Track& track, const WindowContext& context) {
  return stretch(track, std::min(context.from_s, context.steady_from_s.value_or(context.from_s)),
                 context.to_s);
}

bool longer_than(const Stretch& steady, const Stretch& window) {
  constexpr double kClearly = 1.2;
  return static_cast<double>(steady.size()) > kClearly * static_cast<double>(window.size());
}

const setup::RangeSpec* ChannelValue::range() const {
  const RangePart* most = nullptr;
  for (const RangePart& part : parts) {
    if (most == nullptr || part.share > most->share) most = &part;
  }
  if (most == nullptr || most->range == kNoRange) return nullptr;
  return &channel->ranges[static_cast<std::size_t>(most->range)];
}

Quoted ChannelValue::with_noise(const WindowContext& context) const {
  if (!value || !window) return value;
  const auto noise = estimate::type_a_estimate(*window, context.id(), channel->name);
  if (!noise)
    return base::Refusal{channel->name, "too few readings in the window: " + noise.refusal().reason};
  return *value + noise->with_value(0.0);
}

MeterNow meter_now(const ChannelValue& of, const RangePart& part, const setup::Hookup& hookup) {
  const setup::Channel& channel = *of.channel;
  const auto found = estimate::judge_conditions(part.raw, meter_range(channel, part.range),
                                                conditions_of(channel, part.range), of.conditions);
  const estimate::Shares shares = shares_of(hookup, channel, part.range);
  return {found.meter, found.fixed_is_common ? shares : estimate::without_fixed(shares)};
}

/// Each range's errors for the share of the readings that were taken on it: a new range is a new source.
estimate::Quoted meter_error(ChannelValue& of, const setup::Hookup& hookup, const WindowContext& context) {
  const setup::Channel& channel = *of.channel;
  const ZeroOf* zero = context.checks == nullptr ? nullptr : context.checks->zero_of(channel.name);
  Estimate sum{0.0};
  for (const RangePart& part : of.parts) {
    if (part.range == kNoRange) {
      return base::Refusal{
          channel.name,
          channel.ranges.empty()
              ? "uncertainty not known: no accuracy is declared"
              : "uncertainty not known: read beyond the largest range whose accuracy is declared"};
    }
    const MeterNow now = meter_now(of, part, hookup);
    const estimate::Occasion occasion = occasion_of(context, channel);
    const bool zeroed = zero != nullptr && zero->range == part.range;
    Quoted one =
        estimate::with_meter_error(part.raw + (zeroed ? zero->mean() : 0.0), now.meter, occasion, now.shares);
    if (one && zeroed && zero->twice) one = estimate::zero_corrected(*one, zero->check, now.meter, occasion);
    if (!one) return base::Refusal{channel.name, one.refusal().reason};
    if (zero != nullptr && !zeroed) {
      of.remarks.push_back(channel.name + ": its zero was measured on another range than it was read on, " +
                           now.meter.meter.range + ", and is not taken off here");
    }
    sum = sum + part.share * *one;
  }
  return sum.with_value(of.raw);
}

void attach_meter_error(ChannelValue& into, const Quoted& raw) {
  into.unknown.clear();
  const Estimate known = (conversion_error(into) + into.own).with_value(into.middle);
  into.plain = known;
  if (!raw) {
    into.unknown = raw.refusal().text();
    into.value = raw.refusal();
    return;
  }
  into.plain = known + into.sensitivity * raw->with_value(0.0);
  into.value = into.unknown.empty()
                   ? into.plain
                   : Quoted{base::Refusal{into.channel->name, "uncertainty not known: " + into.unknown}};
}

namespace {

/// A tied channel's value as the tie's first meter would have shown it.
void apply_tie(ChannelValue& into, const WindowContext& context) {
  const TieOf* tied = context.checks == nullptr ? nullptr : context.checks->tie_of(into.channel->name);
  if (tied == nullptr || !into.value) return;
  if (into.parts.size() != 1 || into.parts.front().range != tied->range) {
    into.remarks.push_back(into.channel->name + ": tied to " + tied->first +
                           " on another range than it was read on; the tie is not used here");
    return;
  }
  into.value = estimate::tied(*into.value, tied->tie);
  into.plain = into.value;
}

}  // namespace

ChannelValue channel_value(const store::StoredRun& run, const setup::Hookup& hookup,
                           const std::vector<Track>& tracks, std::size_t index,
                           const WindowContext& context) {
  ChannelValue into;
  into.channel = &hookup.channels[index];
  into.typed = into.channel->typed;
  into.conditions.ambient_c = context.ambient_c;
  if (const setup::Instrument* instrument = hookup.find_instrument(into.channel->instrument))
    into.conditions.days_since_adjustment = days_since(instrument->calibrated, context.at_ns);
  const auto& couple = into.channel->conversion.thermocouple;
  for (std::size_t i = 0; couple && !couple->cold_junction.empty() && i < tracks.size(); ++i) {
    const setup::Channel& other = hookup.channels[i];
    // A cold junction that has one itself would be a chain without end.
    const bool plain = !other.conversion.thermocouple || other.conversion.thermocouple->cold_junction.empty();
    if (other.name != couple->cold_junction || !plain) continue;
    const ChannelValue cold = channel_value(run, hookup, tracks, i, context);
    if (const Quoted known = cold.with_noise(context)) into.cold_junction = *known;
  }
  if (into.typed) {
    fill_typed(into, run, hookup, tracks[index], context);
  } else {
    fill_linked(into, hookup, tracks[index], context);
  }
  apply_tie(into, context);
  return into;
}

}  // namespace loadstair::evaluation
