#include "daemon/evaluation/bench_checks.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/estimate/type_a.h"
#include "daemon/evaluation/live.h"
#include "daemon/evaluation/quantity.h"

namespace loadstair::evaluation {
namespace {

using estimate::Estimate;
using estimate::Quoted;

/// A zero this many times beyond what the specification allows its offset, and beyond this share of the
/// range, is no zero: somebody forgot to short the inputs (common practice, no source).
constexpr double kFarBeyond = 10.0;
constexpr double kFarShare = 0.01;

struct Found {
  Estimate raw{0.0};
  int range = kNoRange;
  std::string instant;  ///< "zero before"
};

/// What a linked channel showed over a window, in the meter's unit, with its Type A alone.
base::Outcome<Found> zero_linked(const setup::Hookup& hookup, const Track& track,
                                 const WindowContext& window) {
  const setup::Channel& channel = *track.channel;
  const setup::Instrument* instrument = hookup.find_instrument(channel.instrument);
  const Stretch part = whole_within(track, window.from_s, window.to_s,
                                    instrument == nullptr ? 0.0 : instrument->integration_s);
  if (part.size() == 0) return base::Refusal{window.step, "no good reading in the window"};
  Found found;
  found.instant = window.step;
  found.range = track.range[part.first];
  for (std::size_t i = part.first; i < part.last; ++i) {
    if (track.range[i] != found.range)
      return base::Refusal{window.step, "the meter changed its range in the window"};
  }
  const auto steady =
      series::steady_window(part.raws(), {.declared_correlation_s = correlation_of(hookup, channel)});
  if (!steady) return base::Refusal{window.step, steady.refusal().reason};
  const Quoted mean = estimate::type_a_estimate(*steady, window.id(), "zero of " + channel.name);
  if (!mean) return base::Refusal{window.step, mean.refusal().reason};
  found.raw = *mean;
  return found;
}

base::Outcome<Found> zero_typed(const store::StoredRun& run, const Track& track,
                                const WindowContext& window) {
  const setup::Channel& channel = *track.channel;
  double low = 0.0;
  double high = 0.0;
  double sum = 0.0;
  double count = 0.0;
  Found found;
  found.instant = window.step;
  for (const store::StoredTypedAnswer& answer : run.typed) {
    if (answer.step != window.step_index || answer.channel != track.index) continue;
    if ((answer.flags & instrument::kUnusable) != 0) continue;
    low = count == 0.0 ? answer.value : std::min(low, answer.value);
    high = count == 0.0 ? answer.value : std::max(high, answer.value);
    found.range = range_of(channel, answer.value, answer.range);
    sum += answer.value;
    ++count;
  }
  if (count == 0.0) return base::Refusal{window.step, "nothing was typed"};
  const std::string name = "rounds of the zero of " + channel.name;
  found.raw = Estimate{sum / count,
                       estimate::make_type_b(estimate::key::window(window.run, window.step, name), name,
                                             estimate::Distribution::rectangular, {channel.name, "", ""}),
                       (high - low) / 2.0 / std::numbers::sqrt3};
  return found;
}

/// d value / d raw where the meter shows next to nothing.
double slope_at_zero(const setup::Channel& channel) {
  const double step = channel.ranges.empty() ? 1e-3 : 1e-3 * channel.ranges.front().upto;
  const auto above = convert(channel, step);
  const auto below = convert(channel, -step);
  return above && below && step > 0.0 ? (*above - *below) / (2.0 * step) : channel.conversion.scale;
}

Quantity in_channel_unit(const Found& found, const setup::Channel& channel) {
  return to_quantity(found.raw * slope_at_zero(channel), channel.unit);
}

std::string shown(const Quantity& quantity) {
  if (!quantity.known) return "not known";
  const double half = quantity.expanded.value_or((quantity.high - quantity.low) / 2.0);
  return base::print_significant(quantity.value, 3) +
         (half > 0.0 ? " \u00b1" + base::print_significant(half, 2) : "") + " " + quantity.unit;
}

/// Beyond every offset that the meter may have.
bool no_zero(double raw, const setup::Channel& channel, int range) {
  if (range == kNoRange) return false;
  const setup::RangeSpec& spec = channel.ranges[static_cast<std::size_t>(range)];
  const double offset = spec.range_percent / 100.0 * spec.upto + (spec.digits + 1.0) * spec.resolution;
  return std::abs(raw) > std::max(kFarBeyond * offset, kFarShare * spec.upto);
}

bool range_used(const Track& track, const store::StoredRun& run, const setup::Stair& stair, int range) {
  if (track.channel->typed) {
    return std::any_of(run.typed.begin(), run.typed.end(), [&](const store::StoredTypedAnswer& answer) {
      const auto step = static_cast<std::size_t>(std::max(answer.step, 0));
      const bool zero = step < stair.steps.size() && stair.steps[step].kind == setup::StepKind::zero;
      return !zero && answer.channel == track.index &&
             range_of(*track.channel, answer.value, answer.range) == range;
    });
  }
  return std::find(track.range.begin(), track.range.end(), range) != track.range.end();
}

/// Readings on the zero's range as a meter without that offset would have shown them.
void take_off(Track& track, const ZeroOf& zero) {
  for (std::size_t i = 0; i < track.raw.size(); ++i) {
    if (track.range[i] != zero.range) continue;
    const auto value = convert(*track.channel, track.raw[i] - zero.mean());
    if (!value) continue;
    track.raw[i] -= zero.mean();
    track.value[i] = *value;
  }
}

class Checker {
 public:
  Checker(const store::StoredRun& run, const setup::Hookup& hookup, const setup::Stair& stair,
          const Windows& windows, std::vector<Track>& tracks)
      : run_{run}, hookup_{hookup}, stair_{stair}, windows_{windows}, tracks_{tracks} {}

  BenchChecks take() {
    for (const std::string& channel : stair_.zero_channels) zero(channel);
    for (std::size_t i = 0; i < stair_.ties.size(); ++i) tie(i);
    return std::move(checks_);
  }

 private:
  [[nodiscard]] std::vector<const WindowContext*> windows_of(setup::StepKind kind, std::size_t check) const {
    std::vector<const WindowContext*> found;
    for (const auto& window : windows_) {
      if (!window) continue;
      const auto place = static_cast<std::size_t>(std::max(window->step_index, 0));
      if (place >= stair_.steps.size() || stair_.steps[place].kind != kind) continue;
      if (kind == setup::StepKind::tie && stair_.steps[place].check != check) continue;
      found.push_back(&*window);
    }
    return found;
  }

  [[nodiscard]] std::optional<std::size_t> place_of(const std::string& channel) const {
    for (std::size_t i = 0; i < hookup_.channels.size(); ++i) {
      if (hookup_.channels[i].name == channel) return i;
    }
    return std::nullopt;
  }

  void zero(const std::string& name) {
    BenchCheckResult result;
    result.kind = "zero";
    result.name = "zero";
    result.channel = name;
    const auto place = place_of(name);
    if (!place) return;
    const setup::Channel& channel = hookup_.channels[*place];
    result.before = result.after = missing(channel.unit, "not measured");
    const std::string why = use_zero(tracks_[*place], channel, result);
    if (!why.empty()) result.text = "zero of " + name + ": " + why;
    checks_.results.push_back(std::move(result));
  }

  /// Returns: why it is not used; empty when it is.
  std::string use_zero(Track& track, const setup::Channel& channel, BenchCheckResult& result) {
    std::vector<Found> found;
    std::string refused;
    for (const WindowContext* window : windows_of(setup::StepKind::zero, 0)) {
      auto one = channel.typed ? zero_typed(run_, track, *window) : zero_linked(hookup_, track, *window);
      if (one) {
        found.push_back(*std::move(one));
      } else {
        refused = ": " + one.refusal().text();
      }
    }
    if (found.empty()) return "not measured" + refused;
    result.before = in_channel_unit(found.front(), channel);
    if (found.size() > 1) result.after = in_channel_unit(found.back(), channel);
    const std::string shows = shown(result.before) + " before" +
                              (found.size() > 1 ? ", " + shown(result.after) + " after" : std::string{});
    const int range = found.front().range;
    if (found.back().range != range) return shows + "; on two ranges, so not taken off";
    for (const Found& one : found) {
      if (no_zero(one.raw.value(), channel, range))
        return shows +
               "; more than any offset of this meter may be, so not taken off: were its inputs shorted in " +
               one.instant + "?";
    }
    if (!range_used(track, run_, stair_, range) || range == kNoRange)
      return shows + "; on a range on which no step was read, so not taken off";
    ZeroOf zero{channel.name, range, {found.front().raw, found.back().raw}, found.size() > 1};
    take_off(track, zero);
    result.applied = true;
    result.text = "zero of " + channel.name + ": " + shows + "; taken off" +
                  (zero.twice ? ", half its change in place of the specified offset"
                              : "; there is no zero after, so the specified offset stays as uncertainty");
    checks_.zeros.push_back(std::move(zero));
    return "";
  }

  void tie(std::size_t number) {
    const setup::Tie& declared = stair_.ties[number];
    std::vector<const WindowContext*> levels = windows_of(setup::StepKind::tie, number);
    for (std::size_t i = 1; i < declared.channels.size(); ++i) {
      BenchCheckResult result;
      result.kind = "tie";
      result.name = declared.name;
      result.channel = declared.channels[i];
      result.ratio = missing("1", "not measured");
      const auto first = place_of(declared.channels.front());
      const auto other = place_of(declared.channels[i]);
      if (!first || !other) continue;
      result.offset = missing(hookup_.channels[*other].unit, "not measured");
      const std::string why = use_tie(*first, *other, levels, result);
      if (!why.empty()) result.text = "tie " + declared.name + ", " + result.channel + ": not used: " + why;
      checks_.results.push_back(std::move(result));
    }
  }

  std::string use_tie(std::size_t first, std::size_t other, const std::vector<const WindowContext*>& levels,
                      BenchCheckResult& result) {
    struct Level {
      estimate::TieLevel readings;
      int range = kNoRange;
    };
    std::vector<Level> measured;
    for (const WindowContext* window : levels) {
      WindowContext context = *window;
      context.checks = &checks_;
      const ChannelValue a = channel_value(run_, hookup_, tracks_, first, context);
      const ChannelValue b = channel_value(run_, hookup_, tracks_, other, context);
      const Quoted with_a = a.with_noise(context);
      const Quoted with_b = b.with_noise(context);
      if (!with_a) return window->step + ": " + with_a.refusal().text();
      if (!with_b) return window->step + ": " + with_b.refusal().text();
      if (b.parts.size() != 1) return window->step + ": " + result.channel + " changed its range";
      measured.push_back({{*with_a, *with_b}, b.parts.front().range});
    }
    if (measured.size() < 2) return "two levels tell a gain from an offset, and fewer were measured";
    const auto [low, high] = std::minmax_element(
        measured.begin(), measured.end(),
        [](const Level& x, const Level& y) { return x.readings.b.value() < y.readings.b.value(); });
    if (low->range != high->range) return "its two levels were read on two ranges";
    const auto found = estimate::tie_check(low->readings, high->readings);
    if (!found) return found.refusal().reason;
    const setup::Channel& channel = hookup_.channels[other];
    const std::string& to = hookup_.channels[first].name;
    result.ratio = to_quantity(found->gain_difference + 1.0, "1");
    result.offset = to_quantity(found->offset_difference, channel.unit);
    result.applied = true;
    result.text = "tie " + result.name + ": " + channel.name + " = " +
                  base::print_fixed(result.ratio.value, 6) + " \u00b1" +
                  base::print_significant(result.ratio.expanded.value_or(0.0), 2) + " times " + to +
                  ", offset " + shown(result.offset) + "; used in place of its specification" +
                  (found->within_specifications ? ""
                                                : "; the two differ by more than their specifications allow: "
                                                  "check wiring, ranges and calibration");
    checks_.ties.push_back({channel.name, to, low->range, *found});
    return "";
  }

  const store::StoredRun& run_;
  const setup::Hookup& hookup_;
  const setup::Stair& stair_;
  const Windows& windows_;
  std::vector<Track>& tracks_;
  BenchChecks checks_;
};

}  // namespace

const ZeroOf* BenchChecks::zero_of(const std::string& channel) const {
  for (const ZeroOf& zero : zeros) {
    if (zero.channel == channel) return &zero;
  }
  return nullptr;
}

const TieOf* BenchChecks::tie_of(const std::string& channel) const {
  for (const TieOf& tie : ties) {
    if (tie.channel == channel) return &tie;
  }
  return nullptr;
}

BenchChecks bench_checks(const store::StoredRun& run, const setup::Hookup& hookup, const setup::Stair& stair,
                         const Windows& windows, std::vector<Track>& tracks) {
  return Checker{run, hookup, stair, windows, tracks}.take();
}

}  // namespace loadstair::evaluation
