#include "daemon/evaluation/decisions.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <optional>
#include <string>
#include <string_view>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/estimate/coverage.h"
#include "analysis/limits/limits.h"
#include "analysis/limits/tables.h"
#include "daemon/evaluation/quantity.h"

namespace loadstair::evaluation {
namespace {

constexpr double kPercent = 100.0;

/// Degrees of freedom of a 95 % coverage factor; infinite at a normal's.
double freedom_of(double k) {
  if (k <= estimate::student_t(estimate::kLevel, 1e6)) return std::numeric_limits<double>::infinity();
  double low = 1.0;
  double high = 1e6;
  for (int i = 0; i < 60; ++i) {
    const double middle = std::sqrt(low * high);
    (estimate::student_t(estimate::kLevel, middle) > k ? low : high) = middle;
  }
  return std::sqrt(low * high);
}

/// A printed figure as analysis takes it.
estimate::Coverage coverage_of(const Quantity& quantity, double scale) {
  estimate::Coverage coverage;
  coverage.value = quantity.value * scale;
  coverage.low = quantity.low * scale;
  coverage.high = quantity.high * scale;
  coverage.level = quantity.level;
  const double half = (coverage.high - coverage.low) / 2.0;
  if (quantity.expanded && quantity.k && *quantity.k > 0.0) {
    coverage.expanded = *quantity.expanded * scale;
    coverage.k = *quantity.k;
    coverage.standard_uncertainty = coverage.expanded / coverage.k;
    coverage.degrees_of_freedom = freedom_of(coverage.k);
  } else {
    coverage.method = estimate::CoverageMethod::monte_carlo;
    coverage.standard_uncertainty = half / estimate::student_t(estimate::kLevel, 1e6);
    coverage.degrees_of_freedom = std::numeric_limits<double>::infinity();
  }
  return coverage;
}

/// A ratio's limit is in per cent.
double scale_of(const setup::Limit& limit, const Quantity& quantity) {
  return limit.unit == "%" && quantity.unit == "1" ? kPercent : 1.0;
}

void fill(DecisionResult& into, const base::Outcome<limits::Decision>& decision) {
  if (!decision) {
    into.decision = "not decided";
    into.text = into.name + (into.step.empty() ? "" : " at " + into.step) + ": " + decision.refusal().text();
    return;
  }
  into.decision = limits::word_of(decision->verdict);
  if (decision->indicative) into.decision = "indicative";
  into.low = decision->tolerance.low;
  into.high = decision->tolerance.high;
  into.probability = decision->conforming_probability;
  into.text = into.name + (into.step.empty() ? "" : " at " + into.step) + ": " + decision->text;
}

void leave_open(DecisionResult& into, const std::string& why) {
  into.decision = "not decided";
  into.text = into.name + (into.step.empty() ? "" : " at " + into.step) + ": not decided, " + why;
}

const Quantity* of_place(const StepResult& step, std::string_view place, bool hot) {
  for (const TemperatureResult& temperature : step.temperatures) {
    if (temperature.place != place) continue;
    if (!hot) return &temperature.end;
    return temperature.at_highest_ambient ? &*temperature.at_highest_ambient : nullptr;
  }
  return nullptr;
}

/// nullptr: a level has no such figure, or it is one of the run.
const Quantity* of_level(const StepResult& step, std::string_view name) {
  struct Named {
    std::string_view name;
    Quantity StepResult::*figure;
  };
  constexpr Named kNamed[] = {
      {"efficiency", &StepResult::efficiency},     {"loss", &StepResult::loss},
      {"input_power", &StepResult::input_power},   {"output_power", &StepResult::output_power},
      {"power_factor", &StepResult::power_factor}, {"thd_voltage", &StepResult::thd_voltage},
      {"thd_current", &StepResult::thd_current},   {"crest_factor", &StepResult::crest_factor},
      {"frequency", &StepResult::frequency},       {"dc_component", &StepResult::dc_component}};
  for (const Named& one : kNamed) {
    if (one.name == name) return &(step.*one.figure);
  }
  constexpr std::string_view kEnd = "temperature ";
  constexpr std::string_view kHot = "hot ";
  if (name.starts_with(kEnd)) return of_place(step, name.substr(kEnd.size()), false);
  if (name.starts_with(kHot)) return of_place(step, name.substr(kHot.size()), true);
  return nullptr;
}

const Quantity* of_run(const RunResult& result, std::string_view name) {
  if (name == "no_load") return &result.no_load;
  if (name == "standby") return &result.standby;
  if (name == "load_regulation") return &result.load_regulation;
  if (name == "line_regulation") return &result.line_regulation;
  for (const WeightedResult& weighted : result.weighted) {
    if (name == "european" && weighted.title.starts_with("European")) return &weighted.efficiency;
    if (name == "cec" && weighted.title.starts_with("CEC")) return &weighted.efficiency;
  }
  return nullptr;
}

std::string no_table_of(const std::string& id) {
  std::string text = "there is no limit table \"" + id + "\"; known are";
  for (const limits::Table& table : limits::tables())
    text += (text.ends_with("are") ? " " : ", ") + std::string{table.id};
  return text;
}

class Decider {
 public:
  Decider(RunResult& result, const std::vector<StepOutcome>& outcomes, const setup::Stair& stair)
      : result_{result}, outcomes_{outcomes}, stair_{stair}, rule_{stair.guard_factor} {}

  void decide(const setup::Limit& limit) {
    if (const Quantity* figure = of_run(result_, limit.quantity)) {
      own(limit, *figure, "");
      return;
    }
    for (const StepOutcome& outcome : outcomes_) {
      if (outcome.kind != setup::StepKind::level || !wanted(limit, outcome.result.label)) continue;
      if (!limit.table.empty()) {
        table(limit, outcome);
        continue;
      }
      const Quantity* figure = of_level(outcome.result, limit.quantity);
      own(limit, figure == nullptr ? missing(limit.unit, "this level has no such figure") : *figure,
          outcome.result.label);
    }
  }

 private:
  static bool wanted(const setup::Limit& limit, const std::string& label) {
    return limit.at.empty() || std::find(limit.at.begin(), limit.at.end(), label) != limit.at.end();
  }

  void own(const setup::Limit& limit, const Quantity& figure, const std::string& step) {
    DecisionResult decision;
    decision.name = limit.name;
    decision.quantity = limit.quantity;
    decision.step = step;
    decision.value = figure;
    decision.source = "the stair file";
    decision.low = limit.low;
    decision.high = limit.high;
    const double scale = scale_of(limit, figure);
    const limits::Tolerance tolerance{limit.low, limit.high};
    if (!figure.known) {
      leave_open(decision, figure.why.empty() ? "it was not measured" : figure.why);
    } else if (figure.lower_bound) {
      fill(decision, limits::decide_lower_bound(figure.value * scale, tolerance, limit.unit));
    } else if (!figure.uncertainty_known) {
      leave_open(decision, figure.why.empty() ? "its uncertainty is not known" : figure.why);
    } else {
      fill(decision, limits::decide(coverage_of(figure, scale), tolerance, limit.unit, rule_));
    }
    result_.decisions.push_back(std::move(decision));
  }

  /// The capture and its channel that a table speaks of: the mains' current at an input for IEC 61000-3-2;
  /// the output's current for feeding in; the output's voltage else.
  struct Signal {
    const CaptureAnalysis* capture = nullptr;
    std::size_t channel = 0;
  };
  static std::optional<Signal> signal_of(const limits::Table& table, const StepOutcome& outcome) {
    const bool mains = table.id.starts_with("iec61000_3_2");
    const bool current =
        mains || table.id.starts_with("ieee1547") || table.id == "iec61727" || table.id == "ieee519_current";
    const auto direction = mains ? setup::Direction::input : setup::Direction::output;
    for (const CaptureAnalysis& capture : outcome.captures) {
      if (!capture.result || capture.port == nullptr || capture.port->kind != setup::PortKind::ac ||
          capture.port->direction != direction)
        continue;
      const auto& place = current ? capture.current : capture.voltage;
      if (place) return Signal{&capture, *place};
    }
    return std::nullopt;
  }

  void table(const setup::Limit& limit, const StepOutcome& outcome) {
    DecisionResult decision;
    decision.name = limit.name;
    decision.step = outcome.result.label;
    decision.quantity = limit.table;
    const limits::Table* found = limits::find_table(limit.table);
    if (found == nullptr) {
      leave_open(decision, no_table_of(limit.table));
      result_.decisions.push_back(std::move(decision));
      return;
    }
    decision.source = found->source;
    const auto signal = signal_of(*found, outcome);
    if (!signal) {
      leave_open(decision, "no capture of this level shows what the table is about");
      result_.decisions.push_back(std::move(decision));
      return;
    }
    for (const limits::Row& row : found->rows) {
      if (row.quantity != limits::Quantity::harmonic) single_row(decision, *found, row, *signal, outcome);
    }
    harmonics(decision, *found, *signal, outcome);
  }

  [[nodiscard]] limits::Circumstances circumstances(const Signal& signal, const StepOutcome& outcome) const {
    limits::Circumstances known;
    if (outcome.result.input_power.known) known.active_power_w = outcome.result.input_power.value;
    const auto& factor = signal.capture->quote.power.power_factor;
    if (factor) known.power_factor = std::abs(factor->value());
    const waveform::WaveformResult& record = *signal.capture->result;
    known.record_s = static_cast<double>(record.samples) * record.interval_s;
    return known;
  }

  [[nodiscard]] std::optional<double> rated_current(const Signal& signal) const {
    const setup::Ratings& ratings = stair_.ratings;
    const bool output = signal.capture->port->direction == setup::Direction::output;
    if (!output || !(ratings.output_voltage_v > 0.0) || !(ratings.output_power_w > 0.0)) return std::nullopt;
    return ratings.output_power_w / ratings.output_voltage_v;
  }

  /// Total distortion and direct component.
  void single_row(DecisionResult decision, const limits::Table& table, const limits::Row& row,
                  const Signal& signal, const StepOutcome& outcome) {
    const waveform::ChannelQuote& quote = signal.capture->quote.channels[signal.channel];
    const auto rated_a = rated_current(signal);
    estimate::Quoted figure = base::Refusal{"", "the table's unit needs what this bench does not declare"};
    if (row.quantity == limits::Quantity::total_distortion &&
        row.unit == limits::LimitUnit::percent_of_fundamental) {
      figure = quote.thd_f;
      if (figure) figure = *figure * kPercent;
    }
    if (row.quantity == limits::Quantity::dc_injection && rated_a) {
      figure = quote.mean;
      if (figure) figure = (figure->value() < 0.0 ? -*figure : *figure) * (kPercent / *rated_a);
    }
    decision.quantity +=
        row.quantity == limits::Quantity::dc_injection ? ": direct component" : ": total distortion";
    if (!row.condition.empty()) decision.quantity += " (" + std::string{row.condition} + ")";
    decision.value = to_quantity(figure, "%");
    if (figure) {
      fill(decision,
           limits::decide(table, row, estimate::coverage(*figure), circumstances(signal, outcome), rule_));
    } else {
      leave_open(decision, figure.refusal().text());
    }
    result_.decisions.push_back(std::move(decision));
  }

  /// A line's level in the row's unit; nullopt where that takes what nobody declared.
  [[nodiscard]] std::optional<double> level_of(const waveform::Harmonic& line, const limits::Row& row,
                                               const Signal& signal) const {
    switch (row.unit) {
      case limits::LimitUnit::ampere:
      case limits::LimitUnit::milliampere_per_watt:
        return line.rms;
      case limits::LimitUnit::percent_of_fundamental:
      case limits::LimitUnit::percent_times_power_factor:
        return kPercent * line.share;
      case limits::LimitUnit::percent_of_rated_current:
        if (const auto rated_a = rated_current(signal)) return kPercent * line.rms / *rated_a;
        return std::nullopt;
      case limits::LimitUnit::percent_of_demand_current:
        return std::nullopt;
    }
    return std::nullopt;
  }

  /// Single lines have no quoted uncertainty: which of them is nearest to its limit is told, and nothing
  /// decided.
  void harmonics(DecisionResult decision, const limits::Table& table, const Signal& signal,
                 const StepOutcome& outcome) {
    const auto& lines = signal.capture->result->channels[signal.channel].harmonics;
    double worst = -1.0;
    int beyond = 0;
    std::string nearest;
    for (const waveform::Harmonic& line : lines) {
      for (const limits::Row& row : table.rows) {
        if (row.quantity != limits::Quantity::harmonic || row.order != line.order || line.order < 2) continue;
        const auto level = level_of(line, row, signal);
        const auto allowed = limits::allowed_by(table, row, circumstances(signal, outcome));
        if (!level || !allowed || !(allowed->limit > 0.0)) continue;
        if (*level > allowed->limit) ++beyond;
        if (*level / allowed->limit <= worst) continue;
        worst = *level / allowed->limit;
        nearest = "order " + base::print_integer(line.order) + " with " + base::print_significant(*level, 3) +
                  " of " + base::print_significant(allowed->limit, 3) + " " + std::string{allowed->unit};
      }
    }
    const bool has_lines = std::any_of(table.rows.begin(), table.rows.end(), [](const limits::Row& row) {
      return row.quantity == limits::Quantity::harmonic;
    });
    if (!has_lines) return;
    decision.quantity += ": harmonics";
    if (worst < 0.0) {
      const std::string why =
          "no line was compared: the record has none, or the limits' unit needs what this bench does not "
          "declare";
      decision.value = missing("1", why);
      leave_open(decision, why);
      result_.decisions.push_back(std::move(decision));
      return;
    }
    decision.value = missing("1", "the uncertainty of single harmonics is not known");
    leave_open(decision, "the uncertainty of single harmonics is not known; " +
                             (beyond == 0 ? std::string{"all lie below their limits"}
                                          : base::print_integer(beyond) + " lie above their limits") +
                             ", nearest to its limit is " + nearest);
    result_.decisions.push_back(std::move(decision));
  }

  RunResult& result_;
  const std::vector<StepOutcome>& outcomes_;
  const setup::Stair& stair_;
  limits::Rule rule_;
};

}  // namespace

void decide_limits(RunResult& result, const std::vector<StepOutcome>& outcomes, const setup::Stair& stair) {
  if (stair.limits.empty()) return;
  result.decision_rule = stair.guard_factor > 0.0
                             ? "guarded acceptance, guard band " + base::print_number(stair.guard_factor) +
                                   " U at 95 % (JCGM 106:2012, ILAC-G8:09/2019)"
                             : "simple acceptance, no guard band (JCGM 106:2012)";
  Decider decider{result, outcomes, stair};
  for (const setup::Limit& limit : stair.limits) decider.decide(limit);
}

}  // namespace loadstair::evaluation
