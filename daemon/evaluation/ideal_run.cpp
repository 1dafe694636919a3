#include "daemon/evaluation/ideal_run.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <utility>

#include "analysis/estimate/generator.h"
#include "daemon/evaluation/ideal_capture.h"
#include "daemon/evaluation/sensor_of.h"
#include "daemon/evaluation/track.h"

namespace loadstair::evaluation {
namespace {

constexpr std::int64_t kSecond = 1'000'000'000;
/// More readings than these in a window say nothing new where there is no noise.
constexpr double kMostReadings = 400.0;
/// Half of what an exchange with a meter takes, and half of what looking at a display and typing takes, s.
constexpr double kExchangeS = 0.01;
constexpr double kTypingS = 2.0;

std::int64_t to_ns(double seconds) {
  return std::llround(seconds * static_cast<double>(kSecond));
}

/// A last digit that is not stuck: half a digit either way before rounding.
class Rounding {
 public:
  double operator()(double raw, double digit) {
    if (!(digit > 0.0)) return raw;
    if (next_ == draws_.size()) {
      generator_.centred(draws_);
      next_ = 0;
    }
    return std::round(raw / digit + draws_[next_++]) * digit;
  }

 private:
  estimate::Generator generator_{1};
  std::array<double, 64> draws_{};
  std::size_t next_ = draws_.size();
};

double digit_of(const setup::Channel& channel, double raw) {
  const int range = range_of(channel, raw, 0.0);
  return range == kNoRange ? 0.0 : channel.ranges[static_cast<std::size_t>(range)].resolution;
}

double expected_efficiency(const setup::Stair& stair) {
  const double percent = stair.ratings.expected_efficiency_percent;
  return percent > 0.0 ? percent / 100.0 : 0.95;
}

double input_power(const setup::Stair& stair, const setup::Step& step) {
  const double efficiency = expected_efficiency(stair);
  const double rated_loss_w = stair.ratings.output_power_w * (1.0 / efficiency - 1.0);
  if (step.kind == setup::StepKind::no_load) return rated_loss_w / 2.0;
  if (step.kind == setup::StepKind::standby) return rated_loss_w / 40.0;
  return step.load_w / efficiency;
}

double counted(const setup::Hookup& hookup, setup::Direction direction) {
  return static_cast<double>(
      std::count_if(hookup.ports.begin(), hookup.ports.end(),
                    [&](const setup::Port& port) { return port.counted && port.direction == direction; }));
}

PortTruth truth_of(const setup::Hookup& hookup, const setup::Stair& stair, const setup::Step& step,
                   const setup::Port& port) {
  PortTruth truth;
  const bool input = port.direction == setup::Direction::input;
  if (port.power_factor_low && port.power_factor.empty())
    truth.power_factor = (1.0 + *port.power_factor_low) / 2.0;
  const bool off = step.kind == setup::StepKind::zero || step.kind == setup::StepKind::tie;
  const bool dead = off || (!input && step.kind == setup::StepKind::standby);
  if (dead || !port.counted) return truth;
  truth.voltage_v =
      input ? step.input_voltage_v.value_or(stair.ratings.input_voltage_v) : stair.ratings.output_voltage_v;
  const double power_w = input ? input_power(stair, step) : step.load_w;
  truth.power_w = power_w / std::max(1.0, counted(hookup, port.direction));
  if (truth.voltage_v > 0.0) truth.current_a = truth.power_w / truth.voltage_v / truth.power_factor;
  return truth;
}

/// Where along a tie a step is: its levels are taken as equal parts of what the first channel has at the
/// greatest load.
double tie_share(const setup::Stair& stair, const setup::Step& step) {
  double levels = 0.0;
  double place = 0.0;
  for (const setup::Step& other : stair.steps) {
    if (other.kind != setup::StepKind::tie || other.check != step.check) continue;
    ++levels;
    if (&other == &step) place = levels;
  }
  return place / std::max(1.0, levels);
}

/// A channel's quantity at a step.
class Quantities {
 public:
  Quantities(const setup::Hookup& hookup, const setup::Stair& stair, const std::vector<StepTruth>& truths)
      : hookup_{hookup}, stair_{stair}, truths_{truths} {}

  [[nodiscard]] double value(const setup::Channel& channel, std::size_t step) const {
    const setup::Step& plan = stair_.steps[step];
    if (plan.kind == setup::StepKind::tie && plan.check < stair_.ties.size()) {
      const auto& tied = stair_.ties[plan.check].channels;
      if (std::find(tied.begin(), tied.end(), channel.name) != tied.end())
        return tie_share(stair_, plan) * greatest(tied.front());
    }
    return at_port(channel, step);
  }

 private:
  [[nodiscard]] double at_port(const setup::Channel& channel, std::size_t step) const {
    if (channel.quantity == setup::Quantity::temperature) return stair_.ambient_c;
    if (channel.quantity == setup::Quantity::frequency) return stair_.ratings.output_frequency_hz;
    for (std::size_t i = 0; i < hookup_.ports.size(); ++i) {
      const setup::Port& port = hookup_.ports[i];
      const PortTruth& truth = truths_[step].ports[i];
      if (channel.name == port.voltage) return truth.voltage_v;
      if (channel.name == port.current) return truth.current_a * truth.current_factor;
      if (channel.name == port.power) return truth.power_w * truth.current_factor;
      if (channel.name == port.power_factor) return truth.power_factor;
    }
    return 0.0;
  }

  [[nodiscard]] double greatest(const std::string& name) const {
    double most = 0.0;
    const setup::Channel* channel = hookup_.find_channel(name);
    for (std::size_t step = 0; channel != nullptr && step < truths_.size(); ++step)
      most = std::max(most, at_port(*channel, step));
    return most;
  }

  const setup::Hookup& hookup_;
  const setup::Stair& stair_;
  const std::vector<StepTruth>& truths_;
};

void read_window(store::StoredChannel& into, const setup::Channel& channel, const setup::Hookup& hookup,
                 double raw, const store::StoredStep& step, Rounding& rounding) {
  const setup::Instrument* instrument = hookup.find_instrument(channel.instrument);
  const double update_s = instrument == nullptr ? 0.0 : instrument->update_s;
  double period_s = std::max(instrument == nullptr ? 1.0 : instrument->poll_s, update_s);
  const double window_s =
      static_cast<double>(*step.average_end_ns - *step.average_begin_ns) / static_cast<double>(kSecond);
  period_s = std::max({period_s, window_s / kMostReadings, 1e-3});
  const double digit = digit_of(channel, raw);
  const double half_width_s = kExchangeS + update_s / 2.0;
  for (double at_s = half_width_s; at_s + half_width_s <= window_s; at_s += period_s) {
    into.t_ns.push_back(*step.average_begin_ns + to_ns(at_s));
    into.half_width_ns.push_back(to_ns(half_width_s));
    into.value.push_back(rounding(raw, digit));
    into.range.push_back(0.0);
    into.flags.push_back(0);
    into.reply.push_back(0);
  }
}

/// Display digits of a meter that declares none: three and a half (common practice, no source).
double typed_digit(const setup::Channel& channel, double raw) {
  const double declared = digit_of(channel, raw);
  if (declared > 0.0 || raw == 0.0) return declared;
  return std::pow(10.0, std::floor(std::log10(std::abs(raw))) - 3.0);
}

void type_rounds(store::StoredRun& run, std::size_t channel, const setup::Channel& declared, double raw,
                 const store::StoredStep& step) {
  const double digit = typed_digit(declared, raw);
  for (int round = 1; round <= 2; ++round) {
    store::StoredTypedAnswer answer;
    answer.step = step.index;
    answer.channel = static_cast<std::int32_t>(channel);
    answer.round = round;
    const std::int64_t at_ns = round == 1 ? *step.average_begin_ns : *step.average_end_ns;
    answer.prompted_ns = at_ns - to_ns(kTypingS);
    answer.entered_ns = at_ns + to_ns(kTypingS);
    answer.value = digit > 0.0 ? std::round(raw / digit) * digit : raw;
    answer.last_digit = digit;
    answer.flags = instrument::kTyped;
    run.typed.push_back(answer);
  }
}

store::StoredStep step_at(const setup::Step& plan, std::size_t index, std::int64_t begin_ns) {
  store::StoredStep step;
  step.index = static_cast<std::int32_t>(index);
  step.label = plan.label;
  step.load_w = plan.load_w;
  step.state = store::StepState::done;
  step.begun_ns = step.soak_begin_ns = begin_ns;
  step.settle_begin_ns = begin_ns + kSecond;
  step.settled_ns = step.average_begin_ns = begin_ns + 2 * kSecond;
  step.average_end_ns = *step.average_begin_ns + std::max(kSecond, to_ns(plan.average_s));
  step.ended_ns = step.average_end_ns;
  step.settled_how = "no criterion";
  if (plan.electrical) step.settled_how = "slope";
  if (plan.thermal) step.settled_how = "rate";
  return step;
}

}  // namespace

std::vector<StepTruth> truths_of(const setup::Hookup& hookup, const setup::Stair& stair) {
  std::vector<StepTruth> truths;
  for (const setup::Step& step : stair.steps) {
    StepTruth& truth = truths.emplace_back();
    for (const setup::Port& port : hookup.ports) truth.ports.push_back(truth_of(hookup, stair, step, port));
  }
  return truths;
}

std::optional<double> raw_of(const setup::Channel& channel, double value, double cold_junction_degc) {
  const setup::Conversion& conversion = channel.conversion;
  double shown = value;
  if (conversion.shunt) {
    // The shunt's own heat makes its resistance: a few rounds find it.
    const sensors::Shunt shunt = shunt_of(*conversion.shunt);
    shown = value * shunt.resistance_ohm;
    for (int i = 0; i < 8; ++i) {
      const auto current = sensors::shunt_current(shunt, shown, conversion.shunt->ambient_c);
      if (!current) return std::nullopt;
      shown = value * current->resistance_ohm;
    }
  } else if (conversion.thermocouple && !conversion.thermocouple->cold_junction.empty()) {
    const auto type = thermocouple_of(*conversion.thermocouple);
    if (!type) return std::nullopt;
    const auto hot = sensors::thermocouple_emf(*type, value);
    const auto cold = sensors::thermocouple_emf(*type, cold_junction_degc);
    if (!hot || !cold) return std::nullopt;
    shown = hot->value - cold->value;
  } else if (conversion.platinum) {
    const auto ohm = sensors::platinum_resistance(value, conversion.platinum->r0_ohm);
    if (!ohm) return std::nullopt;
    shown = ohm->value + conversion.platinum->lead_ohm;
  } else if (conversion.thermistor) {
    const auto ohm = thermistor_resistance(*conversion.thermistor, value);
    if (!ohm) return std::nullopt;
    shown = *ohm;
  }
  return shown / conversion.scale;
}

store::StoredRun ideal_run(const setup::Hookup& hookup, const setup::Stair& stair,
                           const std::vector<StepTruth>& truths, std::int64_t started_ns) {
  store::StoredRun run;
  run.summary.run = 1;
  run.summary.state = store::RunState::done;
  run.summary.started_ns = started_ns;
  run.hookup_text = hookup.text;
  run.stair_text = stair.text;
  for (const setup::Channel& channel : hookup.channels) {
    store::StoredChannel& stored = run.channels.emplace_back();
    stored.entry.name = channel.name;
  }
  const Quantities quantities{hookup, stair, truths};
  Rounding rounding;
  std::int64_t begin_ns = started_ns;
  for (std::size_t i = 0; i < stair.steps.size(); ++i) {
    const store::StoredStep step = step_at(stair.steps[i], i, begin_ns);
    for (std::size_t c = 0; c < hookup.channels.size(); ++c) {
      const setup::Channel& channel = hookup.channels[c];
      const auto raw = raw_of(channel, quantities.value(channel, i), stair.ambient_c);
      if (!raw) continue;
      if (channel.typed) {
        type_rounds(run, c, channel, *raw, step);
      } else {
        read_window(run.channels[c], channel, hookup, *raw, step, rounding);
      }
    }
    if (stair.steps[i].capture) add_ideal_captures(run, hookup, stair, truths[i], step);
    begin_ns = *step.ended_ns + kSecond;
    run.steps.push_back(step);
  }
  run.summary.ended_ns = begin_ns;
  return run;
}

}  // namespace loadstair::evaluation
