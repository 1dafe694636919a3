#include "daemon/evaluation/step_result.h"

#include <algorithm>
#include <cmath>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/estimate/budget.h"
#include "daemon/evaluation/circumstances.h"
#include "daemon/evaluation/loss_projection.h"
#include "daemon/evaluation/port_step.h"
#include "daemon/evaluation/quantity.h"
#include "daemon/evaluation/temperature_result.h"
#include "daemon/evaluation/validation.h"
#include "daemon/evaluation/wattmeter.h"

namespace loadstair::evaluation {
namespace {

SettledResult settled_of(const store::StoredStep& step) {
  SettledResult out;
  out.by = step.settled_how;
  out.settled = out.by == "slope" || out.by == "rate" || out.by == "prediction";
  if (step.settled_ns && step.settle_begin_ns) {
    out.after_s = static_cast<double>(*step.settled_ns - *step.settle_begin_ns) * 1e-9;
  }
  if (out.by.empty()) {
    out.text = "not waited for yet";
  } else if (out.settled) {
    out.text = "settled by " + out.by;
    if (out.after_s) out.text += " after " + base::print_significant(*out.after_s, 3) + " s";
  } else if (out.by == "no criterion") {
    out.text = "the stair file asks for no settling";
  } else {
    out.text = "not settled within its limit: the results are of a bench that still moves";
  }
  return out;
}

std::vector<BudgetEntry> budget_of(const estimate::Quoted& quoted) {
  std::vector<BudgetEntry> out;
  if (!quoted) return out;
  for (const estimate::BudgetLine& line : estimate::budget(*quoted).lines) {
    if (!(line.share > 0.0)) continue;
    out.push_back({line.name, line.owner.instrument, line.owner.function, line.owner.range,
                   line.kind == estimate::Kind::type_a, line.standard_uncertainty, line.share, line.action,
                   line.expanded_if_done});
  }
  return out;
}

/// A whole step without numbers: why.
void refuse_all(StepOutcome& out, const setup::Hookup& hookup, const std::string& why) {
  StepResult& result = out.result;
  result.result_state = "not measured";
  result.input_power = result.output_power = result.loss = missing("W", why);
  result.efficiency = result.power_factor = result.thd_voltage = result.crest_factor = missing("1", why);
  result.thd_current = missing("1", why);
  result.dc_component = missing("V", why);
  result.frequency = missing("Hz", why);
  for (const setup::TemperaturePoint& point : hookup.temperatures) {
    TemperatureResult temperature;
    temperature.place = point.place;
    temperature.channel = point.channel;
    temperature.end = missing("degC", why);
    result.temperatures.push_back(std::move(temperature));
  }
  const base::Refusal refusal{result.label, why};
  out.powers.label = result.label;
  out.powers.input_power = out.powers.output_power = out.powers.loss = out.powers.efficiency = refusal;
}

std::string why_not_measured(const store::StoredStep& step) {
  if (!step.reason.empty()) return "not measured: " + step.reason;
  switch (step.state) {
    case store::StepState::waiting:
      return "not measured: the run has not come to this step";
    case store::StepState::skipped:
      return "not measured: the step was skipped";
    case store::StepState::stopped:
      return "not measured: the step was stopped before its window ended";
    default:
      return "not measured yet";
  }
}

PortResult port_result(const setup::Port& declared, const efficiency::PortPower& real,
                       const efficiency::PortPower& plain, const std::string& unknown) {
  PortResult out;
  out.name = declared.name;
  out.direction = declared.direction == setup::Direction::input ? "input" : "output";
  out.counted = declared.counted;
  const bool only_unknown = !real.active_power.ok() && plain.active_power.ok();
  out.state = only_unknown ? "uncertainty not known" : real.state_text;
  out.method = only_unknown ? plain.method : real.method;
  out.power = either(real.active_power, plain.active_power, "W", unknown);
  out.apparent_power = either(real.apparent_power, plain.apparent_power, "VA", unknown);
  out.power_factor = either(real.power_factor, plain.power_factor, "1", unknown);
  out.voltage = either(real.voltage, plain.voltage, "V", unknown);
  out.current = either(real.current, plain.current, "A", unknown);
  out.corrections = only_unknown ? plain.correction_texts : real.correction_texts;
  return out;
}

/// What is no level on the curve has no efficiency: why. Empty for levels, visited for the first time or
/// again.
std::string why_no_efficiency(setup::StepKind kind) {
  switch (kind) {
    case setup::StepKind::zero:
    case setup::StepKind::tie:
      return "a check of the bench";
    case setup::StepKind::no_load:
      return "without a load there is no efficiency";
    case setup::StepKind::standby:
      return "the converter is off: there is no efficiency";
    case setup::StepKind::level:
    case setup::StepKind::closure:
      break;
  }
  return "";
}

/// Idle steps: what goes in is the result. The output may not even be connected.
void keep_input_only(StepOutcome& out, const std::string& why) {
  StepResult& result = out.result;
  result.efficiency = result.power_factor = missing("1", why);
  result.budget.clear();
  out.powers.efficiency = base::Refusal{result.label, why};
  out.powers.power_factor = out.powers.efficiency;
  if (result.input_power.known) {
    result.result_state = result.input_power.uncertainty_known ? "measured" : "uncertainty not known";
  }
}

/// A lamp bank that nobody switched, a load in another mode: the step is not the one that its label says.
/// The tenth is common practice, no source.
void remark_load(StepResult& result) {
  if (!result.output_power.known || !(result.load_w > 0.0)) return;
  if (std::abs(result.output_power.value - result.load_w) <= 0.1 * result.load_w) return;
  result.remarks.push_back("the output power is " + base::print_significant(result.output_power.value, 3) +
                           " W and the step says " + base::print_significant(result.load_w, 3) +
                           " W: was the load switched as it should be?");
}

void validate(StepOutcome& out, const StepPowers& powers, const store::StoredRun& run) {
  auto validated =
      validated_efficiency(powers.input, powers.totals, run.seed, most_draws_of(run.steps.size()));
  if (!validated) return;
  out.result.validation = std::move(validated->validation);
  if (validated->instead) out.result.efficiency = *std::move(validated->instead);
}

/// How far up their ranges the meters of counted inputs were read.
std::vector<efficiency::RangeUse> uses_of(const StepValues& values) {
  std::vector<efficiency::RangeUse> out;
  for (const setup::Port& port : values.hookup->ports) {
    if (port.direction != setup::Direction::input || !port.counted) continue;
    for (const std::string* name : {&port.voltage, &port.current, &port.power}) {
      const ChannelValue* value = values.find(*name);
      if (value == nullptr || !value->plain || value->range() == nullptr) continue;
      out.push_back({value->channel->name, value->raw, value->range()->upto});
    }
  }
  return out;
}

void fill_powers(StepOutcome& out, const StepValues& values, const store::StoredRun& run, bool validating) {
  StepResult& result = out.result;
  const std::string unknown = unknown_of(values);
  const StepPowers real = step_powers(values, false);
  const StepPowers plain = unknown.empty() ? real : step_powers(values, true);
  const efficiency::StepResult& totals = real.totals;
  result.result_state =
      !totals.efficiency && plain.totals.efficiency ? "uncertainty not known" : totals.state;
  result.input_power = either(totals.input_power, plain.totals.input_power, "W", unknown);
  result.output_power = either(totals.output_power, plain.totals.output_power, "W", unknown);
  result.loss = either(totals.loss, plain.totals.loss, "W", unknown);
  result.efficiency = either(totals.efficiency, plain.totals.efficiency, "1", unknown);
  result.power_factor = either(real.ports.power_factor, plain.ports.power_factor, "1", unknown);
  result.budget = budget_of(totals.efficiency);
  result.loss_budget = budget_of(totals.loss);
  for (std::size_t i = 0; i < values.hookup->ports.size(); ++i) {
    result.ports.push_back(
        port_result(values.hookup->ports[i], real.ports.ports[i], plain.ports.ports[i], unknown));
  }
  result.remarks.insert(result.remarks.end(), totals.remarks.begin(), totals.remarks.end());
  remark_load(result);
  out.powers = totals;
  out.ports = real.ports.ports;
  out.uses = uses_of(values);
  if (validating && why_no_efficiency(out.kind).empty()) validate(out, real, run);
}

/// A meter that measures frequency before a capture.
Quantity frequency_of(const StepValues& values, const Quantity& of_capture) {
  for (const ChannelValue& value : values.channels) {
    if (value.channel->quantity != setup::Quantity::frequency || !value.plain) continue;
    return either(value.with_noise(values.context), value.plain, "Hz", value.unknown);
  }
  return of_capture;
}

void remark_crest(const StepValues& values, std::vector<std::string>& remarks) {
  for (const setup::Port& port : values.hookup->ports) {
    const CaptureAnalysis* capture = capture_of(values.captures, port.name);
    if (capture == nullptr || !capture->result) continue;
    for (const std::string* name : {&port.voltage, &port.current}) {
      const ChannelValue* value = values.find(*name);
      const auto& place = name == &port.voltage ? capture->voltage : capture->current;
      if (value == nullptr || !value->channel->crest_limit || !place) continue;
      const auto& crest = capture->result->channels[*place].crest_factor;
      if (!crest || crest->value <= *value->channel->crest_limit) continue;
      remarks.push_back(value->channel->name + ": its signal has a crest factor of " +
                        base::print_significant(crest->value, 3) + ", more than the " +
                        base::print_significant(*value->channel->crest_limit, 3) +
                        " that the meter's accuracy is declared for");
    }
  }
}

/// Below a tenth of the load many converters work in bursts (common practice, no source). A few typed
/// readings of a current that jumps may agree by chance, and then nothing shows that they are not its mean.
void remark_bursts(const StepValues& values, double rated_w, StepResult& result) {
  const double power_w = result.output_power.known ? result.output_power.value : result.load_w;
  if (!(rated_w > 0.0) || !(power_w < 0.1 * rated_w)) return;
  for (const setup::Port& port : values.hookup->ports) {
    const CaptureAnalysis* capture = capture_of(values.captures, port.name);
    if (port.direction != setup::Direction::input || (capture != nullptr && capture->result)) continue;
    for (const std::string* name : {&port.current, &port.power}) {
      const ChannelValue* value = values.find(*name);
      if (value == nullptr || !value->typed || !value->plain) continue;
      result.remarks.push_back(*name +
                               ": typed, and the output is below 10 % of the rated power: should the "
                               "converter work in bursts, these readings would not show it; link the "
                               "meter or take a capture");
    }
  }
}

/// The last step under load goes by rate, as the sequencer had it; checks of the bench may follow it.
bool nothing_loaded_after(const setup::Stair& stair, const setup::Step& plan) {
  const auto loaded = [](const setup::Step& step) {
    return step.kind == setup::StepKind::level || step.kind == setup::StepKind::closure;
  };
  const auto last = std::find_if(stair.steps.rbegin(), stair.steps.rend(), loaded);
  return last != stair.steps.rend() && &*last == &plan;
}

}  // namespace

const setup::Step* plan_of(const setup::Stair& stair, const store::StoredStep& step) {
  const auto place = static_cast<std::size_t>(std::max(step.index, 0));
  return place < stair.steps.size() ? &stair.steps[place] : nullptr;
}

std::optional<WindowContext> window_of(const store::StoredRun& run, const setup::Hookup& hookup,
                                       const setup::Stair& stair, const std::vector<Track>& tracks,
                                       const store::StoredStep& step, const std::string& name) {
  const bool measured =
      step.average_begin_ns && step.average_end_ns && *step.average_end_ns > *step.average_begin_ns;
  if (!measured) return std::nullopt;
  // Start and number: what two runs do not share must not meet in one key.
  const std::string run_name =
      base::print_integer(run.summary.started_ns) + "." + base::print_integer(run.summary.run);
  WindowContext window{run_name, name, step.index, since_start(run, *step.average_begin_ns),
                       since_start(run, *step.average_end_ns)};
  window.ambient_c = ambient_of(hookup, stair, tracks, window.from_s, window.to_s);
  window.at_ns = *step.average_begin_ns;
  if (step.settled_ns) window.steady_from_s = since_start(run, *step.settled_ns);
  return window;
}

StepOutcome step_outcome(const store::StoredRun& run, const setup::Hookup& hookup, const setup::Stair& stair,
                         const std::vector<Track>& tracks, const store::StoredStep& step,
                         const std::optional<WindowContext>& window, bool validating) {
  StepOutcome out;
  StepResult& result = out.result;
  out.plan = plan_of(stair, step);
  if (out.plan != nullptr) out.kind = out.plan->kind;
  result.index = step.index;
  result.kind = setup::name_of(out.kind);
  result.label = step.label;
  result.load_w = step.load_w;
  result.state = store::name_of(step.state);
  result.settled = settled_of(step);
  if (!window) {
    refuse_all(out, hookup, why_not_measured(step));
    return out;
  }
  const std::string no_efficiency = why_no_efficiency(out.kind);
  if (out.kind == setup::StepKind::zero || out.kind == setup::StepKind::tie) {
    refuse_all(out, hookup, no_efficiency);
    result.result_state = no_efficiency;
    return out;
  }
  StepValues values;
  values.hookup = &hookup;
  values.context = *window;
  for (std::size_t i = 0; i < hookup.channels.size(); ++i)
    values.channels.push_back(channel_value(run, hookup, tracks, i, values.context));
  share_wattmeters(values);
  for (const ChannelValue& value : values.channels)
    result.remarks.insert(result.remarks.end(), value.remarks.begin(), value.remarks.end());
  values.captures = captures_of(run, hookup, stair, values.context, result.remarks);
  fill_powers(out, values, run, validating);
  if (!no_efficiency.empty()) keep_input_only(out, no_efficiency);
  CaptureQuantities captured = quantities_of(values.captures);
  result.thd_voltage = std::move(captured.thd_voltage);
  result.crest_factor = std::move(captured.crest_factor);
  result.thd_current = std::move(captured.thd_current);
  result.dc_component = std::move(captured.dc_component);
  result.frequency = frequency_of(values, captured.frequency);
  remark_crest(values, result.remarks);
  for (std::string& remark : condition_remarks(values, stair, result))
    result.remarks.push_back(std::move(remark));
  if (no_efficiency.empty()) remark_bursts(values, stair.ratings.output_power_w, result);
  const double begun_s =
      since_start(run, step.soak_begin_ns.value_or(step.begun_ns.value_or(*step.average_begin_ns)));
  const bool last = out.plan != nullptr && nothing_loaded_after(stair, *out.plan);
  const StepThermal thermal{out.plan, begun_s, last, out.powers.loss, stair.ratings.highest_ambient_c};
  const auto ends = temperatures_of(hookup, tracks, values.channels, values.context, thermal);
  for (const EndTemperature& end : ends) result.temperatures.push_back(end.result);
  fill_projection(result, values, tracks, out.powers, ends, begun_s);
  if (result.settled.by == "not settled") result.remarks.push_back(result.settled.text);
  out.captures = std::move(values.captures);
  return out;
}

}  // namespace loadstair::evaluation
