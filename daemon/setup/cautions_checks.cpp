#include <algorithm>
#include <set>

#include "analysis/base/number.h"
#include "daemon/setup/cautions_parts.h"

namespace loadstair::setup {
namespace {

using Findings = std::vector<Finding>;

std::string quoted(const std::string& name) {
  return "\"" + name + "\"";
}

bool any_step(const Stair& stair, StepKind kind) {
  return std::any_of(stair.steps.begin(), stair.steps.end(),
                     [&](const Step& step) { return step.kind == kind; });
}

bool has_role(const Hookup& hookup, std::string_view role) {
  return std::any_of(hookup.controls.begin(), hookup.controls.end(),
                     [&](const Control& control) { return control.role == role; });
}

// Zeros and ties are read with other connections than a level, where "low" and "high" make sense.
void find_implausible(const Hookup& hookup, const Stair& stair, Findings& findings) {
  std::set<std::string> names{stair.zero_channels.begin(), stair.zero_channels.end()};
  for (const Tie& tie : stair.ties) names.insert(tie.channels.begin(), tie.channels.end());
  for (const std::string& name : names) {
    const Channel* channel = hookup.find_channel(name);
    if (channel == nullptr || !channel->typed || (!channel->low && !channel->high)) continue;
    findings.push_back(
        {Severity::note, "channel " + quoted(name) +
                             " is typed in a check of the bench; its \"low\" and \"high\" are not "
                             "applied there, so look twice at what you type"});
  }
}

void find_in_ties(const Hookup& hookup, const Stair& stair, Findings& findings) {
  for (std::size_t i = 0; i < stair.ties.size(); ++i) {
    const auto levels = std::count_if(stair.steps.begin(), stair.steps.end(), [&](const Step& step) {
      return step.kind == StepKind::tie && step.check == i;
    });
    if (levels < 2) {
      findings.push_back(
          {Severity::warning,
           "tie " + quoted(stair.ties[i].name) +
               " has one level, so a gain and an offset cannot be told apart; add a second level, "
               "far from the first"});
    }
  }
  if (stair.ties.empty()) {
    if (!hookup.repeatability_percent.empty()) return;
    findings.push_back(
        {Severity::note,
         "no \"repeatability\" is declared and no tie is measured: of each meter's variance 80 % "
         "are supposed to be the same in every run, 10 % the same within a run, 10 % new at each "
         "level (common practice, no source). Differences between runs depend on it"});
    return;
  }
  findings.push_back({Severity::note,
                      "ties: connect meters in series or in parallel with the power off only, and only where "
                      "every meter, lead and jack is rated for the highest level of the tie. An ammeter in "
                      "parallel is a short circuit"});
}

void find_in_zero(const Stair& stair, Findings& findings) {
  if (stair.zero_channels.empty()) return;
  const bool after = std::any_of(stair.steps.begin(), stair.steps.end(), [](const Step& step) {
    return step.kind == StepKind::zero && step.label == "zero after";
  });
  findings.push_back(
      {Severity::note,
       after ? "after the zero check at the end the bench is still wired for it: connect it again before "
               "anything is switched on"
             : "no zero check at the end: how far the zeros drift within the run is not measured"});
}

bool visited_twice(const Stair& stair) {
  for (const Step& one : stair.steps) {
    for (const Step& other : stair.steps) {
      if (&one == &other || one.kind != StepKind::level || other.kind != StepKind::level) continue;
      if (one.load_w == other.load_w && one.input_voltage_v == other.input_voltage_v) return true;
    }
  }
  return false;
}

// The first level again, last, spans the whole run.
void find_in_closure(const Stair& stair, Findings& findings) {
  const Step* last = nullptr;
  for (const Step& step : stair.steps) {
    if (step.kind == StepKind::closure) last = &step;
  }
  if (last == nullptr) {
    if (visited_twice(stair)) return;
    findings.push_back({Severity::note, "no closure check: drift of the bench within the run is not tested"});
    return;
  }
  const auto first = std::find_if(stair.steps.begin(), stair.steps.end(),
                                  [](const Step& step) { return step.kind == StepKind::level; });
  const auto index = static_cast<std::size_t>(first - stair.steps.begin());
  if (first == stair.steps.end() || last->check == index) return;
  findings.push_back({Severity::note, "the closure does not end with the first level, " +
                                          quoted(first->label) +
                                          ", so drift is tested over a part of the run only; name that level "
                                          "last"});
}

void find_in_idle(const Hookup& hookup, const Stair& stair, Findings& findings) {
  for (const Step& step : stair.steps) {
    if (!step.prompt.empty() || !step.on.empty()) continue;
    if (step.kind == StepKind::no_load && !has_role(hookup, "load")) {
      findings.push_back({Severity::warning,
                          "step \"no load\": the hook-up has no load that could be switched off, and no "
                          "\"prompt\" asks a person to; add one of the two"});
    }
    if (step.kind == StepKind::standby && !has_role(hookup, "converter")) {
      findings.push_back({Severity::warning,
                          "step \"standby\": the hook-up has no control of the role \"converter\", and no "
                          "\"prompt\" asks a person to switch the converter off; add one of the two"});
    }
  }
}

bool has_ambient(const Hookup& hookup, std::string_view place) {
  return std::any_of(
      hookup.temperatures.begin(), hookup.temperatures.end(),
      [&](const TemperaturePoint& point) { return point.place == place && !point.ambient_channel.empty(); });
}

}  // namespace

void find_in_checks(const Hookup& hookup, const Stair& stair, Findings& findings) {
  find_in_ties(hookup, stair, findings);
  find_in_zero(stair, findings);
  find_implausible(hookup, stair, findings);
  find_in_idle(hookup, stair, findings);
  find_in_closure(stair, findings);
}

void find_in_limits(const Hookup& hookup, const Stair& stair, Findings& findings) {
  for (const Limit& limit : stair.limits) {
    const auto undecided = [&](const std::string& why) {
      findings.push_back({Severity::warning, "limit " + quoted(limit.name) + " will stay undecided: " + why});
    };
    const std::set<std::string> of_captures = {"thd_voltage", "thd_current", "crest_factor", "dc_component"};
    if (of_captures.count(limit.quantity) > 0 && hookup.captures.empty()) {
      undecided(limit.quantity + " comes from a capture, and the hook-up has no \"captures\"");
    }
    if (limit.quantity.starts_with("hot ") && !has_ambient(hookup, limit.quantity.substr(4))) {
      undecided("the temperature is projected by its rise over the air, and the place has no \"ambient\"");
    }
    if (limit.quantity == "no_load" && !any_step(stair, StepKind::no_load)) {
      undecided("the stair has no check \"no_load\"");
    }
    if (limit.quantity == "standby" && !any_step(stair, StepKind::standby)) {
      undecided("the stair has no check \"standby\"");
    }
  }
}

void find_in_conditions(const Hookup& hookup, const Stair* stair, Findings& findings) {
  for (const Channel& channel : hookup.channels) {
    const Conditions& conditions = channel.conditions;
    const Instrument* instrument = hookup.find_instrument(channel.instrument);
    if (conditions.days && (instrument == nullptr || instrument->calibrated.empty())) {
      findings.push_back(
          {Severity::note, "channel " + quoted(channel.name) + ": its accuracy holds for " +
                               base::print_number(*conditions.days) +
                               " days, but no date of calibration is declared, so that is not checked"});
    }
    if (stair == nullptr) continue;
    const bool cold = conditions.low_c && stair->ambient_c < *conditions.low_c;
    const bool hot = conditions.high_c && stair->ambient_c > *conditions.high_c;
    if (!cold && !hot) continue;
    findings.push_back(
        {Severity::warning, "channel " + quoted(channel.name) + ": the ambient of " +
                                base::print_number(stair->ambient_c) + " degC is " +
                                (cold ? "below " : "above ") +
                                base::print_number(cold ? *conditions.low_c : *conditions.high_c) +
                                " degC, beyond which its accuracy does not hold as declared" +
                                (conditions.percent_of_spec_per_k ? "; its uncertainty grows with each kelvin"
                                                                  : "; readings will be flagged")});
  }
}

}  // namespace loadstair::setup
