#include "analysis/efficiency/start_up.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>
#include <numeric>

#include "analysis/base/number.h"

namespace loadstair::efficiency {
namespace {

constexpr std::size_t kLeastSamples = 20;
constexpr double kSamplesPerHalfCycle = 20;
constexpr double kHead = 0.05;

bool all_finite(std::span<const double> values) {
  return std::all_of(values.begin(), values.end(), [](double value) { return std::isfinite(value); });
}

double mean(std::span<const double> values) {
  return std::accumulate(values.begin(), values.end(), 0.0) / static_cast<double>(values.size());
}

std::size_t part(const Envelope& envelope, double share) {
  return std::max<std::size_t>(1,
                               static_cast<std::size_t>(share * static_cast<double>(envelope.values.size())));
}

double initial_of(const Envelope& envelope) {
  return mean(std::span{envelope.values}.first(part(envelope, kHead)));
}

std::span<const double> tail_of(const Envelope& envelope) {
  return std::span{envelope.values}.last(part(envelope, kTail));
}

/// Where the record first reaches a level, in samples from its start, and how steep it is there.
struct Crossing {
  std::size_t after = 0;  ///< the first sample at or above the level
  double place = 0;
  double slope = 0;  ///< per sample, above zero
};

std::optional<Crossing> crossing(std::span<const double> values, double level) {
  const auto found =
      std::find_if(values.begin(), values.end(), [level](double value) { return value >= level; });
  if (found == values.end() || found == values.begin()) return std::nullopt;
  Crossing out;
  out.after = static_cast<std::size_t>(found - values.begin());
  out.slope = *found - *(found - 1);
  out.place = static_cast<double>(out.after) - (*found - level) / out.slope;
  return out;
}

/// The instants of a record, as far as they are known.
class Instants {
 public:
  Instants(const Envelope& envelope, double noise, std::string name)
      : envelope_{envelope}, noise_{noise}, name_{std::move(name)} {}

  [[nodiscard]] Estimate at(const Crossing& crossing, const std::string& level) const {
    const double interval_s = envelope_.interval_s;
    const double grid = 0.5 / std::numbers::sqrt3;
    const double shaken = std::min(noise_ / crossing.slope, static_cast<double>(envelope_.values.size()));
    const auto source = [&](const std::string& part) {
      return estimate::make_type_b(estimate::key::component("start-up, " + name_, level + ", " + part),
                                   "start-up: " + part, estimate::Distribution::rectangular);
    };
    return Estimate{envelope_.first_s + crossing.place * interval_s, source("sampling"), grid * interval_s} +
           Estimate{0, source("noise"), shaken * interval_s};
  }

 private:
  const Envelope& envelope_;
  double noise_;
  std::string name_;
};

/// The last place outside the band, where the record enters it for good. nullopt: it was never outside.
std::optional<Crossing> entry(std::span<const double> values, double final, double half_width) {
  const auto outside = [&](double value) { return std::abs(value - final) > half_width; };
  const auto last = std::find_if(values.rbegin(), values.rend(), outside);
  if (last == values.rend() || last == values.rbegin()) return std::nullopt;
  Crossing out;
  out.after = static_cast<std::size_t>(values.rend() - last);
  const double before = values[out.after - 1];
  const double edge = before > final ? final + half_width : final - half_width;
  out.slope = std::max(std::abs(values[out.after] - before), std::numeric_limits<double>::min());
  out.place = static_cast<double>(out.after - 1) + std::abs(edge - before) / out.slope;
  return out;
}

double deepest_fall(std::span<const double> values) {
  double highest = values.empty() ? 0 : values.front();
  double deepest = 0;
  for (const double value : values) {
    highest = std::max(highest, value);
    deepest = std::max(deepest, highest - value);
  }
  return deepest;
}

Quoted overshoot_of(const Envelope& envelope, double final, const std::string& name) {
  const double greatest = *std::max_element(envelope.values.begin(), envelope.values.end());
  const std::span<const double> tail = tail_of(envelope);
  const double excursion = std::max(0.0, *std::max_element(tail.begin(), tail.end()) - final);
  const double most = std::max(0.0, greatest - final) / final;
  const double least = std::max(0.0, greatest - excursion - final) / final;
  return estimate::bounded(
      least, most,
      estimate::make_type_b(estimate::key::component("start-up, " + name, "noise on the greatest value"),
                            "start-up: noise on the greatest value", estimate::Distribution::rectangular));
}

std::string text_of(const StartUp& out) {
  const auto number = [](const Quoted& quoted, double scale, const std::string& unit) {
    return quoted ? base::print_significant(quoted->value() * scale, 3) + " " + unit
                  : "unknown (" + quoted.refusal().reason + ")";
  };
  std::string text = "rise time " + number(out.rise_time, 1e3, "ms") + ", overshoot " +
                     number(out.overshoot, 100, "%") + ", ";
  if (out.monotonic) return text + "monotonic";
  return text + "not monotonic: it falls by " + base::print_significant(100 * out.deepest_fall, 2) +
         " % of the final value during the rise";
}

base::Outcome<void> check(const Envelope& envelope, const StartUpSettings& settings) {
  const std::string place = "start-up, " + settings.name;
  const bool sound = std::isfinite(envelope.first_s) && envelope.interval_s > 0 &&
                     std::isfinite(envelope.interval_s) && all_finite(envelope.values);
  if (!sound) return base::Refusal{place, "samples and their interval must be finite numbers"};
  if (envelope.values.size() < kLeastSamples) return base::Refusal{place, "fewer than 20 samples"};
  if (!(settings.band > 0) || !(settings.noise_tolerance >= 0)) {
    return base::Refusal{place, "the band must be above zero, the noise tolerance zero or more"};
  }
  const double final = mean(tail_of(envelope));
  if (!(final > 0) || !std::isfinite(final)) {
    return base::Refusal{place, "the record does not end above zero"};
  }
  if (!shows_a_start(envelope)) {
    return base::Refusal{place, "the record begins above 10 % of its final value: it shows no start"};
  }
  for (const double value : tail_of(envelope)) {
    if (std::abs(value - final) <= settings.band * final) continue;
    return base::Refusal{place, "it never settles: the last fifth of the record leaves the band of " +
                                    base::print_significant(100 * settings.band, 2) + " %"};
  }
  return {};
}

}  // namespace

base::Outcome<Envelope> half_cycle_rms(std::span<const double> values, double interval_s,
                                       double frequency_hz) {
  const std::string place = "half-cycle envelope";
  if (!(interval_s > 0) || !(frequency_hz > 0) || !std::isfinite(interval_s) || !all_finite(values)) {
    return base::Refusal{place, "samples, interval and frequency must be finite, the last two above zero"};
  }
  const double length = 0.5 / (frequency_hz * interval_s);
  const double halves = values.empty() ? 0 : std::floor(static_cast<double>(values.size() - 1) / length);
  if (!(length >= kSamplesPerHalfCycle)) return base::Refusal{place, "fewer than 20 samples a half cycle"};
  if (!(halves >= 2)) return base::Refusal{place, "the record is shorter than two half cycles"};
  // The integral of the squares from the start, by trapezoids, between samples along the line of the squares.
  std::vector<double> sum(values.size());
  for (std::size_t i = 1; i < values.size(); ++i) {
    sum[i] = sum[i - 1] + (values[i - 1] * values[i - 1] + values[i] * values[i]) / 2;
  }
  if (!std::isfinite(sum.back())) return base::Refusal{place, "the squares are beyond what a number holds"};
  const auto integral_to = [&](double place_samples) {
    const std::size_t before = std::min(static_cast<std::size_t>(place_samples), values.size() - 2);
    const double part = place_samples - static_cast<double>(before);
    const double low = values[before] * values[before];
    const double high = values[before + 1] * values[before + 1];
    return sum[before] + part * (low + part * (high - low) / 2);
  };
  Envelope out;
  out.interval_s = length * interval_s;
  out.first_s = out.interval_s / 2;
  for (double half = 0; half < halves; ++half) {
    const double squares = integral_to((half + 1) * length) - integral_to(half * length);
    out.values.push_back(std::sqrt(std::max(0.0, squares) / length));
  }
  return out;
}

bool shows_a_start(const Envelope& envelope) {
  if (envelope.values.size() < kLeastSamples || !all_finite(envelope.values)) return false;
  const double final = mean(tail_of(envelope));
  return final > 0 && initial_of(envelope) < kLeastStart * final &&
         envelope.values.front() < kLeastStart * final;
}

base::Outcome<StartUp> start_up(const Envelope& envelope, const StartUpSettings& settings) {
  if (const auto sound = check(envelope, settings); !sound) return sound.refusal();
  const std::string place = "start-up, " + settings.name;
  const std::span<const double> values{envelope.values};
  StartUp out;
  out.initial = initial_of(envelope);
  out.final = mean(tail_of(envelope));
  const auto low = crossing(values, 0.1 * out.final);
  const auto high = crossing(values, 0.9 * out.final);
  if (!low || !high) return base::Refusal{place, "it does not pass 10 % and 90 % of its final value"};
  double squares = 0;
  for (const double value : tail_of(envelope)) squares += (value - out.final) * (value - out.final);
  const double noise = std::sqrt(squares / static_cast<double>(tail_of(envelope).size()));
  const Instants instants{envelope, noise, settings.name};
  const Estimate at_low = instants.at(*low, "10 %");
  const std::size_t on_edge = high->after - low->after;
  if (on_edge < static_cast<std::size_t>(kLeastOnEdge)) {
    out.rise_time = base::Refusal{place, "only " + base::print_integer(static_cast<std::int64_t>(on_edge)) +
                                             " samples between 10 and 90 %: sample faster"};
  } else {
    out.rise_time = instants.at(*high, "90 %") - at_low;
  }
  out.overshoot = overshoot_of(envelope, out.final, settings.name);
  out.deepest_fall = deepest_fall(values.subspan(low->after, on_edge + 1)) / out.final;
  out.monotonic = out.deepest_fall <= settings.noise_tolerance;
  const bool known = settings.event_s && std::isfinite(*settings.event_s);
  out.delay = known ? Quoted{at_low - *settings.event_s}
                    : Quoted{base::Refusal{place, "when it was switched on is not known"}};
  const auto settled = entry(values, out.final, settings.band * out.final);
  if (settled) {
    const Estimate at_band = instants.at(*settled, "band");
    out.settling_time = known ? at_band - *settings.event_s : at_band - at_low;
  } else {
    out.settling_time = base::Refusal{place, "the record was never outside its band"};
  }
  out.text = text_of(out);
  return out;
}

}  // namespace loadstair::efficiency
