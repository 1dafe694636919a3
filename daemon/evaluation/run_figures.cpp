#include "daemon/evaluation/run_figures.h"

#include <algorithm>
#include <cmath>
#include <map>
#include <optional>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/efficiency/closure.h"
#include "analysis/efficiency/fold_back.h"
#include "analysis/efficiency/idle_power.h"
#include "analysis/efficiency/regulation.h"
#include "analysis/efficiency/start_up.h"
#include "daemon/evaluation/quantity.h"
#include "drivers/scope_csv/scope_csv.h"

namespace loadstair::evaluation {
namespace {

using estimate::Estimate;
using estimate::Quoted;

/// Load regulation ends at rated power; a level this much above is still that one.
constexpr double kFullLoad = 1.02;
constexpr double kSameVoltage = 0.01;

const std::string& name_of_step(const StepOutcome& outcome) {
  return outcome.powers.label.empty() ? outcome.result.label : outcome.powers.label;
}

// ---- no load, standby

Quantity idle(const std::vector<StepOutcome>& outcomes, setup::StepKind kind, const std::string& what,
              std::vector<std::string>& remarks) {
  const auto found = std::find_if(outcomes.begin(), outcomes.end(),
                                  [kind](const StepOutcome& outcome) { return outcome.kind == kind; });
  if (found == outcomes.end()) return missing("W", "the stair file asks for no " + what + " step");
  const efficiency::IdlePower power = efficiency::idle_power(found->powers.input_power, found->uses);
  for (const std::string& remark : power.remarks) remarks.push_back(what + ": " + remark);
  return found->result.input_power;
}

// ---- the output over loads and input voltages

/// The output that voltages and currents are told of: the first one that counts.
std::optional<std::size_t> output_of(const setup::Hookup& hookup) {
  for (std::size_t i = 0; i < hookup.ports.size(); ++i) {
    if (hookup.ports[i].direction == setup::Direction::output && hookup.ports[i].counted) return i;
  }
  return std::nullopt;
}

double input_voltage(const StepOutcome& outcome, const setup::Stair& stair) {
  const bool planned = outcome.plan != nullptr && outcome.plan->input_voltage_v.has_value();
  return planned ? *outcome.plan->input_voltage_v : stair.ratings.input_voltage_v;
}

/// Levels with an output voltage, and what is wrong with the last one that has none.
struct Levels {
  std::vector<const StepOutcome*> list;
  std::size_t output = 0;
  std::string why;

  [[nodiscard]] const efficiency::PortPower& port(const StepOutcome& outcome) const {
    return outcome.ports[output];
  }
};

Levels levels_of(const std::vector<StepOutcome>& outcomes, std::size_t output) {
  Levels out;
  out.output = output;
  for (const StepOutcome& outcome : outcomes) {
    if (outcome.kind != setup::StepKind::level || outcome.ports.size() <= output) continue;
    const Quoted& voltage = outcome.ports[output].voltage;
    if (voltage) {
      out.list.push_back(&outcome);
    } else {
      out.why = voltage.refusal().text();
    }
  }
  return out;
}

bool at_rated_voltage(const StepOutcome& outcome, const setup::Stair& stair) {
  const double rated = stair.ratings.input_voltage_v;
  return std::abs(input_voltage(outcome, stair) - rated) <= kSameVoltage * rated;
}

Quantity to_result(const base::Outcome<efficiency::Regulation>& found, const std::string& why) {
  if (found) return to_quantity(found->value, "1");
  return missing("1", found.refusal().reason + (why.empty() ? "" : " (" + why + ")"));
}

Quantity over_loads(const Levels& levels, const setup::Stair& stair, std::vector<std::string>& remarks) {
  const double rated_w = stair.ratings.output_power_w;
  std::vector<efficiency::RegulationPoint> points;
  for (const StepOutcome* outcome : levels.list) {
    const double load_w =
        outcome->powers.output_power ? outcome->powers.output_power->value() : outcome->result.load_w;
    if (!at_rated_voltage(*outcome, stair) || (rated_w > 0.0 && load_w > kFullLoad * rated_w)) continue;
    points.push_back({name_of_step(*outcome), load_w, *levels.port(*outcome).voltage});
  }
  const auto found = efficiency::load_regulation(points, stair.ratings.output_voltage_v);
  if (found && rated_w > 0.0 && found->to < (2.0 - kFullLoad) * rated_w) {
    remarks.push_back("load regulation: only up to " + base::print_significant(found->to, 3) +
                      " W, the rated power was not measured");
  }
  return to_result(found, levels.why);
}

/// At the load that was measured at the most input voltages; the greatest such load.
Quantity over_input(const Levels& levels, const setup::Stair& stair) {
  std::map<double, std::vector<efficiency::RegulationPoint>> by_load;
  for (const StepOutcome* outcome : levels.list) {
    by_load[outcome->result.load_w].push_back(
        {name_of_step(*outcome), input_voltage(*outcome, stair), *levels.port(*outcome).voltage});
  }
  base::Outcome<efficiency::Regulation> best =
      efficiency::line_regulation({}, stair.ratings.output_voltage_v);
  std::size_t most = 0;
  for (const auto& [load_w, points] : by_load) {
    auto found = efficiency::line_regulation(points, stair.ratings.output_voltage_v);
    if (!found || points.size() < most) continue;
    most = points.size();
    best = std::move(found);
  }
  return to_result(best, levels.why);
}

// ---- fold-back

Estimate within(double value, const std::optional<double>& percent, const std::string& part) {
  if (!percent) return Estimate{value};
  const double half_width = std::abs(value * *percent / 100.0);
  return estimate::bounded(
      value - half_width, value + half_width,
      estimate::make_type_b(estimate::key::component("overload circuit", part), "overload circuit: " + part,
                            estimate::Distribution::rectangular));
}

efficiency::Sense sense_of(const std::string& name) {
  if (name == "rms") return efficiency::Sense::rms;
  return name == "average" ? efficiency::Sense::average : efficiency::Sense::peak;
}

/// A ratio of the current's shape: quoted, or without what is not known of its error.
std::optional<Estimate> shape_ratio(const Quoted& quoted, const std::optional<double>& plain) {
  if (quoted) return *quoted;
  if (plain) return Estimate{*plain};
  return std::nullopt;
}

/// What the threshold sees of the current, and in words where that comes from.
struct Shape {
  efficiency::WaveShape ratios;
  std::string text;
};

Shape shape_of(const StepOutcome* nearest, const setup::Port& port) {
  if (port.kind == setup::PortKind::dc) {
    return {{Estimate{1}, Estimate{1}}, "its ripple is left out"};
  }
  const CaptureAnalysis* capture = nearest == nullptr ? nullptr : capture_of(nearest->captures, port.name);
  if (capture == nullptr || !capture->result || !capture->current) {
    return {{}, "a sine is assumed: no capture has the current's shape"};
  }
  const waveform::ChannelResult& channel = capture->result->channels[*capture->current];
  const waveform::ChannelQuote& quote = capture->quote.channels[*capture->current];
  const auto plain = [](const base::Outcome<waveform::Bounded>& value) {
    return value ? std::optional{value->value} : std::nullopt;
  };
  const bool in_band = channel.crest_factor_in_band.ok();
  const auto crest = in_band ? shape_ratio(quote.crest_factor_in_band, plain(channel.crest_factor_in_band))
                             : shape_ratio(quote.crest_factor, plain(channel.crest_factor));
  const auto form = shape_ratio(
      quote.form_factor, channel.form_factor ? std::optional<double>{*channel.form_factor} : std::nullopt);
  Shape out;
  if (crest) out.ratios.crest_factor = *crest;
  if (form) out.ratios.form_factor = *form;
  out.text = crest && form ? "shape of the current from the capture of \"" + name_of_step(*nearest) + "\""
                           : "a sine is assumed: the capture does not tell the current's shape";
  return out;
}

/// The level with the greatest current below the knee; without a knee, of all.
const StepOutcome* nearest_below(const Levels& levels, const std::vector<const StepOutcome*>& used,
                                 const Quoted& knee_current) {
  const StepOutcome* best = nullptr;
  for (const StepOutcome* outcome : used) {
    const double current = levels.port(*outcome).current->value();
    if (knee_current && current > knee_current->value()) continue;
    if (best == nullptr || current > levels.port(*best).current->value()) best = outcome;
  }
  return best;
}

Quantity knee_power(const efficiency::FoldBack& found, const StepOutcome* nearest, const Levels& levels,
                    const setup::Port& port) {
  if (!found.knee_current) return missing("W", found.text);
  const Estimate apparent = *found.knee_current * *found.knee_voltage;
  if (port.kind == setup::PortKind::dc) return to_quantity(apparent, "W");
  if (nearest == nullptr || !levels.port(*nearest).power_factor) {
    return missing("W", "the power factor at the knee is not known");
  }
  return to_quantity(apparent * *levels.port(*nearest).power_factor, "W");
}

void add_expected(FoldBackResult& out, const setup::Overload& overload, const efficiency::FoldBack& found,
                  const Shape& shape) {
  const Estimate threshold = within(overload.threshold_v, overload.threshold_tolerance_percent, "threshold");
  const Estimate resistor = within(overload.sense_ohm, overload.sense_tolerance_percent, "sense resistor");
  const Quoted expected =
      efficiency::trip_current(threshold, resistor, sense_of(overload.sense), shape.ratios);
  out.expected_current = to_quantity(expected, "A");
  if (!expected) return;
  if (!found.knee_current) {
    out.text += "; expected trip " + base::print_significant(expected->value(), 4) + " A";
  } else if (const auto agreement = efficiency::trip_agreement(*found.knee_current, *expected)) {
    out.text = agreement->text;
  }
  if (overload.sense != "rms") out.text += " (" + overload.sense + " sensing; " + shape.text + ")";
  if (!overload.threshold_tolerance_percent || !overload.sense_tolerance_percent) {
    out.text += "; not all tolerances of threshold and resistor are declared";
  }
}

std::optional<FoldBackResult> fold_back_of(const Levels& levels, const setup::Port& port,
                                           const setup::Stair& stair) {
  std::vector<efficiency::OutputPoint> points;
  std::vector<const StepOutcome*> used;
  for (const StepOutcome* outcome : levels.list) {
    const efficiency::PortPower& power = levels.port(*outcome);
    if (!power.current || !at_rated_voltage(*outcome, stair)) continue;
    points.push_back({name_of_step(*outcome), *power.current, *power.voltage});
    used.push_back(outcome);
  }
  const auto found = efficiency::fold_back(points);
  const bool told = found && (stair.overload || found->state != efficiency::FoldState::none_within_span);
  if (!found && !stair.overload) return std::nullopt;
  if (found && !told) return std::nullopt;
  FoldBackResult out;
  if (stair.overload) out.sense = stair.overload->sense;
  if (!found) {
    const std::string why = found.refusal().text();
    out.knee_current = missing("A", why);
    out.knee_power = missing("W", why);
    out.expected_current = missing("A", why);
    out.text = "not looked for: " + why;
    return out;
  }
  const StepOutcome* nearest = nearest_below(levels, used, found->knee_current);
  out.knee_current = to_quantity(found->knee_current, "A");
  out.knee_power = knee_power(*found, nearest, levels, port);
  out.expected_current = missing("A", "the stair file declares no overload circuit");
  out.text = found->text;
  if (stair.overload) add_expected(out, *stair.overload, *found, shape_of(nearest, port));
  for (const std::string& remark : found->remarks) out.text += "; " + remark;
  return out;
}

// ---- start-up

/// The voltage of an output as a magnitude over time; a refusal where the file has none.
base::Outcome<efficiency::Envelope> envelope_of(const store::StoredCapture& stored,
                                                const setup::CaptureSource& source, bool alternating,
                                                double frequency_hz) {
  const auto file = scope_csv::read_scope_csv(stored.bytes, stored.file_name);
  if (!file) return file.refusal();
  const auto column = scope_csv::find_channel(*file, source.voltage_column);
  if (!column) return column.refusal();
  efficiency::Envelope out;
  out.interval_s = file->samples.interval_s;
  for (const double sample : file->samples.columns[*column].values) {
    out.values.push_back(sample * source.voltage_scale);
  }
  if (!alternating) return out;
  return efficiency::half_cycle_rms(out.values, out.interval_s, frequency_hz);
}

StartUpResult to_result(const efficiency::Envelope& envelope, const std::string& file) {
  efficiency::StartUpSettings settings;
  settings.name = file;
  const auto found = efficiency::start_up(envelope, settings);
  StartUpResult out;
  if (!found) {
    out.rise_time = missing("s", found.refusal().reason);
    out.overshoot = missing("1", found.refusal().reason);
    out.text = file + ": " + found.refusal().reason;
    return out;
  }
  out.rise_time = to_quantity(found->rise_time, "s");
  out.overshoot = to_quantity(found->overshoot, "1");
  out.monotonic = found->monotonic;
  out.text = found->text + " (" + file + ")";
  return out;
}

std::optional<StartUpResult> start_up_of(const store::StoredRun& run, const setup::Hookup& hookup,
                                         const setup::Stair& stair) {
  for (const store::StoredCapture& stored : run.captures) {
    for (const setup::CaptureSource& source : hookup.captures) {
      const setup::Port* port = hookup.find_port(source.port);
      const bool output = port != nullptr && port->direction == setup::Direction::output;
      if (source.instrument != stored.instrument || !output || source.voltage_column.empty()) continue;
      const auto envelope =
          envelope_of(stored, source, port->kind == setup::PortKind::ac, stair.ratings.output_frequency_hz);
      if (envelope && efficiency::shows_a_start(*envelope)) return to_result(*envelope, stored.file_name);
    }
  }
  return std::nullopt;
}

// ---- closure

base::Outcome<efficiency::CurvePoint> point_of(const StepOutcome& outcome) {
  const efficiency::StepResult& powers = outcome.powers;
  const std::string& name = name_of_step(outcome);
  for (const Quoted* quoted : {&powers.efficiency, &powers.output_power, &powers.input_power, &powers.loss}) {
    if (!*quoted) return base::Refusal{name, quoted->refusal().text()};
  }
  return efficiency::CurvePoint{name, *powers.input_power, *powers.output_power, *powers.loss,
                                *powers.efficiency};
}

/// Of the efficiency around a power, from the measured levels on either side of it; at an end of the curve,
/// from the last two.
std::optional<double> slope_around(const std::vector<efficiency::CurvePoint>& points, double power_w) {
  if (points.size() < 2) return std::nullopt;
  std::size_t nearest = 0;
  const auto distance = [&](std::size_t i) { return std::abs(points[i].output_power.value() - power_w); };
  for (std::size_t i = 1; i < points.size(); ++i) {
    if (distance(i) < distance(nearest)) nearest = i;
  }
  const efficiency::CurvePoint& low = points[nearest == 0 ? 0 : nearest - 1];
  const efficiency::CurvePoint& high = points[std::min(nearest + 1, points.size() - 1)];
  const double apart_w = high.output_power.value() - low.output_power.value();
  if (!(apart_w > 0.0)) return std::nullopt;
  return (high.efficiency.value() - low.efficiency.value()) / apart_w;
}

ClosureResult closure_of(const StepOutcome& first, const StepOutcome& again, const RunResult& result) {
  ClosureResult out;
  out.label = name_of_step(first);
  out.again = name_of_step(again);
  const auto refuse = [&](const base::Refusal& why) {
    out.difference = missing("1", why.text());
    out.text = out.again + ": no closure: " + why.text();
    return out;
  };
  const auto one = point_of(first);
  if (!one) return refuse(one.refusal());
  const auto other = point_of(again);
  if (!other) return refuse(other.refusal());
  const auto found =
      efficiency::closure(*one, *other, slope_around(result.points, one->output_power.value()));
  if (!found) return refuse(found.refusal());
  out.difference = to_quantity(found->difference, "1");
  out.allowed = found->allowed;
  out.held = found->held;
  out.text = out.again + ": " + found->text;
  return out;
}

std::vector<ClosureResult> closures_of(const std::vector<StepOutcome>& outcomes, const RunResult& result) {
  std::vector<ClosureResult> out;
  for (const StepOutcome& again : outcomes) {
    if (again.kind != setup::StepKind::closure || again.plan == nullptr) continue;
    const auto first = std::find_if(outcomes.begin(), outcomes.end(), [&](const StepOutcome& outcome) {
      return outcome.result.index >= 0 && static_cast<std::size_t>(outcome.result.index) == again.plan->check;
    });
    if (first != outcomes.end()) out.push_back(closure_of(*first, again, result));
  }
  return out;
}

}  // namespace

void run_figures(RunResult& result, const std::vector<StepOutcome>& outcomes, const store::StoredRun& run,
                 const setup::Hookup& hookup, const setup::Stair& stair) {
  result.no_load = idle(outcomes, setup::StepKind::no_load, "no-load", result.remarks);
  result.standby = idle(outcomes, setup::StepKind::standby, "standby", result.remarks);
  if (const auto output = output_of(hookup)) {
    const Levels levels = levels_of(outcomes, *output);
    result.load_regulation = over_loads(levels, stair, result.remarks);
    result.line_regulation = over_input(levels, stair);
    result.fold_back = fold_back_of(levels, hookup.ports[*output], stair);
  } else {
    result.load_regulation = result.line_regulation = missing("1", "the hook-up file has no output");
  }
  result.start_up = start_up_of(run, hookup, stair);
  result.closure = closures_of(outcomes, result);
}

}  // namespace loadstair::evaluation
