// Hand prompts and typed rounds.
#include <algorithm>
#include <utility>

#include "analysis/base/number.h"
#include "daemon/evaluation/live.h"
#include "daemon/sequencer/state.h"

namespace loadstair::sequencer {
namespace {

using base::Outcome;
using base::Refusal;
using boost::asio::awaitable;

Refusal not_open(std::int64_t id) {
  return {"prompt " + base::print_integer(id), "it is not open any more; look at the run's present state"};
}

}  // namespace

std::vector<std::string> hand_cautions(const setup::Hookup& hookup) {
  bool live = false;
  for (const auto& port : hookup.ports) live = live || port.live;
  std::vector<std::string> cautions;
  if (live) {
    cautions.emplace_back(
        "Dangerous voltages: never touch a conductor of the hook-up while the power is on, and never work "
        "alone; "
        "the hardware emergency stop within reach.");
    cautions.emplace_back(
        "Before touching anything: isolate, then prove dead with a tester (prove the tester, test, prove the "
        "tester "
        "again), never by a screen. Capacitors keep their charge: wait for the discharge, then measure.");
    cautions.emplace_back(
        "Both DC rails of a transformerless inverter may carry mains-frequency voltage to earth; no scope "
        "ground on "
        "them, rated differential probes only.");
  }
  cautions.emplace_back(
      "Never unplug a DC lead under load. Batteries stay live. Lamps and resistors burn. Check the ammeter's "
      "jacks "
      "before a voltage reading. Local codes and licensed practice come first; this program is no safety "
      "device.");
  return cautions;
}

awaitable<Go> Sequencer::State::hand_prompt(const setup::Step& plan) {
  if (plan.prompt.empty()) co_return Go::on;
  const auto go = co_await ask_hand(plan.prompt, hand_cautions(bench.hookup()));
  if (go == Go::on) {
    // What the hand did counts as the change of the set point.
    blank_guards();
    applied_ns = clock.now_ns();
  }
  co_return go;
}

awaitable<Go> Sequencer::State::ask_hand(std::string text, std::vector<std::string> cautions) {
  OpenPrompt open;
  open.id = next_prompt++;
  open.kind = PromptKind::hand;
  open.text = text;
  open.cautions = std::move(cautions);
  open.since_ns = clock.now_ns();
  const auto id = open.id;
  prompt = std::move(open);
  enter(StepPhase::prompt, "waits for the person at the bench: " + text);
  const std::function<bool()> gone = [this, id] { return !prompt || prompt->id != id; };
  const auto go = co_await wait_for(gone, INT64_MAX);
  prompt.reset();
  co_return go;
}

namespace {

/// The channels of a check that is about some of them; nullptr: the step is about all.
const std::vector<std::string>* channels_of_check(const setup::Stair& stair, const setup::Step& plan) {
  if (plan.kind == setup::StepKind::zero) return &stair.zero_channels;
  if (plan.kind == setup::StepKind::tie && plan.check < stair.ties.size()) {
    return &stair.ties[plan.check].channels;
  }
  return nullptr;
}

/// At a zero or a tie a channel reads what the check makes it read, not what the bench gives in service.
setup::Channel without_plausible_limits(setup::Channel channel) {
  channel.low.reset();
  channel.high.reset();
  return channel;
}

}  // namespace

std::vector<std::size_t> Sequencer::State::typed_channels(const setup::Step& plan) const {
  std::vector<std::size_t> found;
  const auto& channels = bench.hookup().channels;
  const auto* wanted = channels_of_check(stair, plan);
  for (std::size_t i = 0; i < channels.size(); ++i) {
    if (!channels[i].typed) continue;
    if (wanted && std::find(wanted->begin(), wanted->end(), channels[i].name) == wanted->end()) continue;
    found.push_back(i);
  }
  return found;
}

/// Two rounds, the second in reverse order and, as far as the first one tells, so late that it ends with the
/// window: then each channel's two instants lie around the window's middle, and a drift falls out.
awaitable<Go> Sequencer::State::typed_rounds(const setup::Step& plan, std::int64_t window_begin_ns,
                                             std::int64_t window_least_ns) {
  if (const auto go = co_await typed_round(plan, 1); go != Go::on) co_return go;
  const auto took = clock.now_ns() - window_begin_ns;
  const auto second = window_begin_ns + window_least_ns - took;
  if (second > clock.now_ns()) {
    enter(StepPhase::average, "averages; the second round of typed values comes next", second);
    if (const auto go = co_await wait_until(second); go != Go::on) co_return go;
  }
  co_return co_await typed_round(plan, 2);
}

awaitable<Go> Sequencer::State::typed_round(const setup::Step& plan, std::int32_t round) {
  auto channels = typed_channels(plan);
  if (round == 2) std::reverse(channels.begin(), channels.end());
  for (const auto channel : channels) {
    if (const auto go = co_await typed_prompt(channel, round); go != Go::on) co_return go;
  }
  co_return Go::on;
}

awaitable<Go> Sequencer::State::typed_prompt(std::size_t channel, std::int32_t round) {
  const auto& declared = bench.hookup().channels[channel];
  OpenPrompt open;
  open.id = next_prompt++;
  open.kind = PromptKind::typed;
  open.channel = declared.name;
  open.unit = meter_unit(declared);
  open.round = round;
  open.rounds = 2;
  open.text = "Read " + declared.name + " (in " + open.unit + ") and type it, with its range and last digit.";
  if (channels_of_check(stair, stair.steps[static_cast<std::size_t>(step_index)]) == nullptr) {
    open.low = declared.low;
    open.high = declared.high;
  }
  for (const auto& range : declared.ranges) open.ranges.push_back(range.upto);
  if (const auto last = last_typed.find(channel); last != last_typed.end()) open.last_value = last->second;
  open.since_ns = clock.now_ns();
  const auto id = open.id;
  prompt = std::move(open);
  prompt_channel = channel;
  enter(StepPhase::typed, "waits for " + declared.name + ", round " + base::print_integer(round) + " of 2");
  const std::function<bool()> gone = [this, id] { return !prompt || prompt->id != id; };
  const auto go = co_await wait_for(gone, INT64_MAX);
  prompt.reset();
  co_return go;
}

Outcome<void> Sequencer::State::answer(std::int64_t id, std::string by) {
  if (!prompt || prompt->id != id) return not_open(id);
  if (prompt->kind != PromptKind::hand) {
    return Refusal{prompt->channel, "this prompt wants a value"};
  }
  bench.writer().post(store::PromptItem{run, step_index, prompt->text, "done", std::move(by),
                                        prompt->since_ns, clock.now_ns()});
  prompt.reset();
  wake.notify();
  changed();
  return {};
}

Outcome<void> Sequencer::State::refuse(std::int64_t id, std::string why) {
  if (!prompt || prompt->id != id) return not_open(id);
  if (prompt->kind == PromptKind::hand) {
    bench.writer().post(store::PromptItem{run, step_index, prompt->text, "refused: " + why, "",
                                          prompt->since_ns, clock.now_ns()});
    skip_demand = "the prompt was refused: " + why;
  } else {
    event("not typed", prompt->channel,
          "no value in round " + base::print_integer(prompt->round) + ": " +
              (why.empty() ? "no reason given" : why));
  }
  prompt.reset();
  wake.notify();
  changed();
  return {};
}

namespace {

std::optional<double> cold_junction_of(const recorder::Bench& bench, const setup::Channel& channel) {
  const auto& sensor = channel.conversion.thermocouple;
  if (!sensor || sensor->cold_junction.empty()) return std::nullopt;
  const auto place = bench.find_channel(sensor->cold_junction);
  if (!place || bench.window(*place).empty()) return std::nullopt;
  const auto last = bench.window(*place).back();
  return std::isfinite(last.value) ? std::optional{last.value} : std::nullopt;
}

}  // namespace

Outcome<void> Sequencer::State::enter_typed(std::int64_t id, const TypedEntry& entry, const std::string& by) {
  const bool open = prompt && prompt->id == id && prompt->kind != PromptKind::hand;
  const auto earlier = std::find_if(typed.begin(), typed.end(),
                                    [id](const Typed& one) { return one.prompt == id && !one.superseded; });
  if (!open && (earlier == typed.end() || !run_task)) return not_open(id);
  Typed one;
  one.prompt = id;
  one.channel = open ? prompt_channel : earlier->channel;
  one.round = open ? prompt->round : earlier->round;
  // A correction repairs what was written down, not when the meter was read.
  one.prompted_ns = open ? prompt->since_ns : earlier->prompted_ns;
  one.entered_ns = open ? clock.now_ns() : earlier->entered_ns;
  auto channel = bench.hookup().channels[one.channel];
  if (channels_of_check(stair, stair.steps[static_cast<std::size_t>(step_index)])) {
    channel = without_plausible_limits(std::move(channel));
  }
  auto read = read_typed(channel, entry);
  if (!read) return read.refusal();
  one.value = std::move(*read);

  std::optional<double> other_round;
  for (const auto& before : typed) {
    if (before.channel == one.channel && before.round != one.round && !before.superseded) {
      other_round = before.value.value;
    }
  }
  const auto converted = evaluation::convert(channel, one.value.value, cold_junction_of(bench, channel));
  const auto doubt =
      converted ? why_implausible(channel, one.value, *converted, other_round) : converted.refusal().reason;
  if (!doubt.empty()) {
    const auto asked = doubted.find(id);
    const bool stays = entry.confirmed && asked != doubted.end() && asked->second.value == one.value.value;
    if (!stays) {
      doubted[id] = one.value;
      if (open) {
        prompt->kind = PromptKind::confirm;
        prompt->why = doubt;
        prompt->value_text = one.value.text;
      }
      changed();
      return Refusal{channel.name, doubt + "; look at the meter again, then correct it or confirm it"};
    }
  }
  store::TypedAnswer answer;
  answer.run = run;
  answer.step = step_index;
  answer.channel = static_cast<std::int32_t>(one.channel);
  answer.round = one.round;
  answer.prompted_ns = one.prompted_ns;
  answer.entered_ns = one.entered_ns;
  answer.text = one.value.text;
  answer.value = one.value.value;
  answer.unit = one.value.unit;
  answer.range = one.value.range;
  answer.last_digit = one.value.last_digit;
  if (!doubt.empty()) answer.flags |= instrument::kImplausible;
  bench.writer().post(answer);
  if (!open) {
    event("corrected", channel.name,
          "round " + base::print_integer(one.round) + ": \"" + one.value.text + "\" instead of \"" +
              earlier->value.text + "\" (" + by + ")");
  }
  for (auto& before : typed) {
    if (before.channel == one.channel && before.round == one.round) before.superseded = true;
  }
  const auto half_ns = (one.entered_ns - one.prompted_ns) / 2;
  recorder::Point point;
  point.t_ns = one.prompted_ns + half_ns;
  point.half_width_ns = half_ns;
  point.arrived_ns = clock.now_ns();
  point.raw = one.value.value;
  point.flags = answer.flags;
  bench.show_typed(one.channel, point);
  last_typed[one.channel] = one.value.value;
  doubted.erase(id);
  typed.push_back(std::move(one));
  if (open) {
    prompt.reset();
    wake.notify();
  }
  changed();
  return {};
}

}  // namespace loadstair::sequencer
