#include "daemon/evaluation/typed_value.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "analysis/base/number.h"
#include "daemon/evaluation/bench_checks.h"
#include "daemon/evaluation/live.h"

namespace loadstair::evaluation {
namespace {

using estimate::Distribution;
using estimate::Estimate;

/// A typed digit coarser than the meter's last one by more than this was rounded by the person.
constexpr double kCoarser = 1.5;

struct Round {
  double raw = 0.0, value = 0.0;
  int range = kNoRange;
  double last_digit = 0.0;
  double time_s = 0.0, half_width_s = 0.0;
};

/// The zero that was measured on that range, meter's unit; 0 where none was.
double zero_on(const WindowContext& context, const std::string& channel, int range) {
  const ZeroOf* zero = context.checks == nullptr ? nullptr : context.checks->zero_of(channel);
  return zero != nullptr && zero->range == range ? zero->mean() : 0.0;
}

std::vector<Round> rounds_of(ChannelValue& into, const store::StoredRun& run, const Track& track,
                             const WindowContext& context) {
  std::vector<Round> rounds;
  for (const store::StoredTypedAnswer& answer : run.typed) {
    if (answer.step != context.step_index || answer.channel != track.index) continue;
    if ((answer.flags & instrument::kUnusable) != 0) continue;
    const std::optional<double> cold_degc =
        into.cold_junction ? std::optional{into.cold_junction->value()} : std::nullopt;
    const int range = range_of(*into.channel, answer.value, answer.range);
    const double raw = answer.value - zero_on(context, into.channel->name, range);
    const auto value = convert(*into.channel, raw, cold_degc);
    if (!value) {
      into.remarks.push_back(into.channel->name + ": \"" + answer.text +
                             "\" not used: " + value.refusal().reason);
      continue;
    }
    if ((answer.flags & instrument::kImplausible) != 0) {
      into.remarks.push_back(into.channel->name + ": \"" + answer.text +
                             "\" is far from what was expected and was confirmed");
    }
    const double prompted_s = since_start(run, answer.prompted_ns);
    const double entered_s = since_start(run, answer.entered_ns);
    rounds.push_back({raw, *value, range, answer.last_digit, (prompted_s + entered_s) / 2.0,
                      std::abs(entered_s - prompted_s) / 2.0});
  }
  return rounds;
}

void add_half_width(ChannelValue& into, const WindowContext& context, const std::string& part,
                    double half_width) {
  if (!(half_width > 0.0)) return;
  const std::string name = part + " of " + into.channel->name;
  into.own =
      into.own + Estimate{0.0,
                          estimate::make_type_b(estimate::key::window(context.run, context.step, name), name,
                                                Distribution::rectangular, {into.channel->name, "", ""}),
                          half_width / std::numbers::sqrt3};
}

/// Half of what lies between the rounds, and the slope between them times what is not known of their
/// instants.
double spread_of(const std::vector<Round>& rounds, const WindowContext& context) {
  const auto [least, most] = std::minmax_element(
      rounds.begin(), rounds.end(), [](const Round& a, const Round& b) { return a.value < b.value; });
  double mean_s = 0.0;
  double half_width_s = 0.0;
  for (const Round& round : rounds) {
    mean_s += round.time_s / static_cast<double>(rounds.size());
    half_width_s += round.half_width_s / static_cast<double>(rounds.size());
  }
  const double apart_s = std::abs(most->time_s - least->time_s);
  const double difference = most->value - least->value;
  const double slope_per_s = apart_s > 0.0 ? difference / apart_s : 0.0;
  return difference / 2.0 + slope_per_s * (half_width_s + std::abs(mean_s - context.middle_s()));
}

/// Rounds that lie apart by more than the meter explains: the display moves, and half of what lies between
/// two readings is then no bound of how far their mean strays.
void remark_restless(ChannelValue& into, const std::vector<Round>& rounds, const Estimate& error) {
  if (rounds.size() < 2) return;
  const auto [least, most] = std::minmax_element(
      rounds.begin(), rounds.end(), [](const Round& a, const Round& b) { return a.raw < b.raw; });
  const double half_way = (most->raw - least->raw) / 2.0;
  if (!(half_way > error.standard_uncertainty())) return;
  into.remarks.push_back(into.channel->name + ": its rounds differ by " +
                         base::print_significant(2.0 * half_way, 2) +
                         ", more than the meter's accuracy explains; a few typed readings of a display that "
                         "moves say little of its mean: link the meter, or type more rounds");
}

}  // namespace

void fill_typed(ChannelValue& into, const store::StoredRun& run, const setup::Hookup& hookup,
                const Track& track, const WindowContext& context) {
  const setup::Channel& channel = *into.channel;
  const std::vector<Round> rounds = rounds_of(into, run, track, context);
  if (rounds.empty()) {
    into.value = into.plain = base::Refusal{channel.name, "nothing was typed in this step"};
    return;
  }
  double last_digit = 0.0;
  for (const Round& round : rounds) {
    into.raw += round.raw / static_cast<double>(rounds.size());
    into.middle += round.value / static_cast<double>(rounds.size());
    last_digit = std::max(last_digit, round.last_digit);
    const int range = round.range;
    const auto same = std::find_if(into.parts.begin(), into.parts.end(),
                                   [&](const RangePart& part) { return part.range == range; });
    const double share = 1.0 / static_cast<double>(rounds.size());
    if (same == into.parts.end()) {
      into.parts.push_back({range, share, round.raw});
    } else {
      same->raw += (round.raw - same->raw) * share / (same->share + share);
      same->share += share;
    }
  }
  const setup::RangeSpec* spec = into.range();
  const double resolution = spec == nullptr ? 0.0 : spec->resolution;
  const double per_raw =
      into.raw != 0.0 ? std::abs(into.middle / into.raw) : std::abs(channel.conversion.scale);
  if (rounds.size() == 1) {
    // Nothing shows how it fluctuates: one last digit either way (common practice, no source).
    into.remarks.push_back(channel.name + ": typed in one round only");
    add_half_width(into, context, "single round", per_raw * std::max(last_digit, resolution));
  } else {
    add_half_width(into, context, "two rounds", spread_of(rounds, context));
  }
  if (last_digit > kCoarser * resolution) {
    add_half_width(into, context, "last digit as typed", per_raw * last_digit / 2.0);
  }
  const estimate::Quoted error = meter_error(into, hookup, context);
  if (error) remark_restless(into, rounds, *error);
  attach_meter_error(into, error);
}

}  // namespace loadstair::evaluation
