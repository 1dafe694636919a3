// The checks of the bench: they are written in one place of the stair file and become steps before and after
// the levels.
#include <utility>

#include "analysis/base/number.h"
#include "daemon/setup/reading.h"
#include "daemon/setup/stair_parts.h"

namespace loadstair::setup {
namespace {

using document::ObjectReader;
using document::print_text;
using document::Type;

constexpr std::string_view kRestore = "Connect the bench again as the hook-up file says.";

std::string index_text(std::size_t index) {
  return base::print_integer(static_cast<std::int64_t>(index));
}

// "A." and "B" become "A. B".
std::string join_sentences(const std::string& first, const std::string& second) {
  if (first.empty() || second.empty()) return first + second;
  const bool ended = std::string_view{".!?"}.find(first.back()) != std::string_view::npos;
  return first + (ended ? " " : ". ") + second;
}

std::string join_actions(const std::string& first, const std::string& second) {
  if (first.empty() || second.empty()) return first + second;
  return first + "; " + second;
}

// How the wiring is changed for a check, and what undoes it.
struct Rewiring {
  std::string prompt, action;
  std::string restore, restore_action;
};

Rewiring read_rewiring(ObjectReader& reader, std::string_view example) {
  Rewiring rewiring;
  rewiring.prompt = reader.text("prompt", example);
  rewiring.action = reader.text_or("hand_action", "");
  rewiring.restore = reader.has("restore")
                         ? reader.text("restore", "\"restore\": \"Connect the meters again.\"")
                         : std::string{kRestore};
  rewiring.restore_action = reader.text_or("restore_action", "");
  return rewiring;
}

// Appends steps; what undoes the last rewiring is asked at the step that comes next.
class Sequence {
 public:
  void add(Step step) {
    step.rewire = join_sentences(restore_, step.rewire);
    step.rewire_action = join_actions(restore_action_, step.rewire_action);
    restore_.clear();
    restore_action_.clear();
    steps_.push_back(std::move(step));
  }
  void undo_next(const Rewiring& rewiring) {
    restore_ = rewiring.restore;
    restore_action_ = rewiring.restore_action;
  }
  [[nodiscard]] std::vector<Step>& steps() { return steps_; }

 private:
  std::vector<Step> steps_;
  std::string restore_, restore_action_;
};

void read_window(ObjectReader& reader, Step& step) {
  step.soak_s = reader.number_or("soak_s", kWait, 0.0);
  step.average_s = reader.number("average_s", kPositiveWait, "\"average_s\": 10");
}

// A list of names of which none stands twice. Their places are those of the list's items.
std::vector<std::string> read_names(ObjectReader& reader, std::string_view key) {
  std::vector<std::string> names = reader.texts_or_empty(key);
  for (std::size_t i = 0; i < names.size() && !reader.problem().found(); ++i) {
    if (std::find(names.begin(), names.begin() + static_cast<std::ptrdiff_t>(i), names[i]) ==
        names.begin() + static_cast<std::ptrdiff_t>(i))
      continue;
    reader.problem().report(
        reader.find(key)->items[i].place,
        print_text(names[i]) + " stands twice in " + print_text(key) + "; remove one of the two");
  }
  return names;
}

struct Zero {
  Step step;
  Rewiring rewiring;
  bool after = true;
};

Zero read_zero(ObjectReader& reader, Stair& stair) {
  Zero zero;
  (void)reader.required("channels", Type::list, "\"channels\": [\"input voltage\", \"input current\"]");
  stair.zero_channels = read_names(reader, "channels");
  if (!reader.problem().found() && stair.zero_channels.empty()) {
    reader.complain("channels", "a zero check of no channel measures nothing; name channels, or remove it");
  }
  zero.rewiring = read_rewiring(reader, "\"prompt\": \"Short the inputs of the meters.\"");
  zero.after = reader.flag_or("after", true);
  zero.step.kind = StepKind::zero;
  zero.step.written_at = "checks/zero";
  zero.step.capture = reader.flag_or("capture", false);
  read_window(reader, zero.step);
  return zero;
}

// The levels of one tie: [(label, set points, where)].
std::vector<Step> read_tie_levels(ObjectReader& reader, const std::string& tie, const std::string& at) {
  std::vector<Step> levels;
  const auto* list = reader.required(
      "levels", Type::list,
      R"("levels": [{"label": "low", "set": [{"control": "source", "setting": "voltage", "value": 100}]}])");
  if (list != nullptr && list->items.empty()) {
    reader.complain("levels", "a tie needs a level at which it is measured, and better two");
  }
  for_objects(reader, "levels", kTieLevelForm, [&](ObjectReader& level, std::size_t index) {
    Step step;
    step.kind = StepKind::tie;
    const std::string label = level.text("label", "\"label\": \"low\"");
    step.label = "tie " + tie + ", " + label;
    for (const Step& other : levels) {
      if (other.label != step.label) continue;
      level.complain("label", "the label " + print_text(label) +
                                  " is taken by another level of this tie; labels must differ");
    }
    step.written_at = at + "/levels/" + index_text(index);
    read_set_points(level, step);
    levels.push_back(std::move(step));
  });
  return levels;
}

void read_tie(ObjectReader& reader, std::size_t index, Stair& stair, Sequence& before) {
  Tie tie;
  tie.name = reader.text("name", "\"name\": \"voltmeters\"");
  require_new(reader, "name", tie.name, names_of(stair.ties));
  (void)reader.required("channels", Type::list, "\"channels\": [\"input voltage\", \"output voltage\"]");
  tie.channels = read_names(reader, "channels");
  if (!reader.problem().found() && tie.channels.size() < 2) {
    reader.complain("channels", "a tie compares meters, so it needs two channels at least");
  }
  const Rewiring rewiring =
      read_rewiring(reader, "\"prompt\": \"Connect both voltmeters in parallel to the source.\"");
  const std::vector<std::string> on = read_names(reader, "on");
  Step model;
  read_window(reader, model);
  std::vector<Step> levels = read_tie_levels(reader, tie.name, "checks/ties/" + index_text(index));
  for (Step& step : levels) {
    step.check = index;
    step.on = on;
    step.soak_s = model.soak_s;
    step.average_s = model.average_s;
    if (&step == &levels.front()) {
      step.rewire = rewiring.prompt;
      step.rewire_action = rewiring.action;
    }
    before.add(std::move(step));
  }
  before.undo_next(rewiring);
  stair.ties.push_back(std::move(tie));
}

// Standby, or no load.
void read_idle(ObjectReader& checks, std::string_view key, StepKind kind, Sequence& before) {
  with_object(checks, key, kIdleForm, [&](ObjectReader& reader) {
    Step step;
    step.kind = kind;
    step.label = name_of(kind);
    step.written_at = "checks/" + std::string{key};
    read_set_points(reader, step);
    step.on = read_names(reader, "on");
    read_conduct(reader, step);
    before.add(std::move(step));
  });
}

void read_closure(ObjectReader& reader, const Stair& stair, std::vector<Step>& closures) {
  (void)reader.required("levels", Type::list, "\"levels\": [\"50 %\", \"10 %\"]");
  const std::vector<std::string> wanted = reader.texts_or_empty("levels");
  if (!reader.problem().found() && wanted.empty()) {
    reader.complain("levels", "a closure of no level tests nothing; name labels of steps, or remove it");
  }
  std::vector<std::string_view> labels;
  for (const Step& step : stair.steps) labels.emplace_back(step.label);
  for (std::size_t i = 0; i < wanted.size() && !reader.problem().found(); ++i) {
    const auto at = std::find(labels.begin(), labels.end(), wanted[i]);
    if (at == labels.end()) {
      reader.problem().report(
          reader.find("levels")->items[i].place,
          "there is no step " + print_text(wanted[i]) + document::suggest(wanted[i], labels));
      return;
    }
    const auto original = static_cast<std::size_t>(at - labels.begin());
    Step step = stair.steps[original];
    std::vector<Step> taken = stair.steps;
    taken.insert(taken.end(), closures.begin(), closures.end());
    step.label = unique_label(step.label + " again", taken);
    step.kind = StepKind::closure;
    step.check = original;
    step.written_at = "checks/closure/levels/" + index_text(i);
    closures.push_back(std::move(step));
  }
}

// The labels of the checks are ours; a level that has one of them must go by another name.
void require_free(ObjectReader& checks, const std::vector<Step>& before, const std::vector<Step>& levels) {
  for (const Step& check : before) {
    for (const Step& level : levels) {
      if (check.label != level.label) continue;
      checks.problem().report(checks.place(), "the checks make a step " + print_text(check.label) +
                                                  ", but another step has that label; give that one another");
    }
  }
}

void add_zero_before(const Zero& zero, Sequence& before) {
  Step step = zero.step;
  step.label = "zero before";
  step.rewire = zero.rewiring.prompt;
  step.rewire_action = zero.rewiring.action;
  before.add(std::move(step));
  before.undo_next(zero.rewiring);
}

// Nothing comes after it that could ask for the way back, so it is said at once: a bench that is switched on
// with its inputs shorted is a hazard.
Step zero_after(const Zero& zero) {
  Step step = zero.step;
  step.label = "zero after";
  step.rewire = join_sentences(zero.rewiring.prompt, "When the run has ended: " + zero.rewiring.restore);
  step.rewire_action = zero.rewiring.action;
  return step;
}

void assemble(Sequence& before, std::vector<Step> closures, const std::optional<Zero>& zero, Stair& stair) {
  const std::size_t moved_by = before.steps().size();
  for (Step& step : stair.steps) before.add(std::move(step));
  for (Step& step : closures) {
    step.check += moved_by;
    before.add(std::move(step));
  }
  if (zero && zero->after) before.add(zero_after(*zero));
  stair.steps = std::move(before.steps());
}

}  // namespace

void read_checks(ObjectReader& top, Stair& stair) {
  with_object(top, "checks", kChecksForm, [&](ObjectReader& reader) {
    Sequence before;
    std::optional<Zero> zero;
    std::vector<Step> closures;
    with_object(reader, "zero", kZeroForm, [&](ObjectReader& inner) {
      zero = read_zero(inner, stair);
      add_zero_before(*zero, before);
    });
    for_objects(reader, "ties", kTieForm,
                [&](ObjectReader& tie, std::size_t index) { read_tie(tie, index, stair, before); });
    read_idle(reader, "standby", StepKind::standby, before);
    read_idle(reader, "no_load", StepKind::no_load, before);
    with_object(reader, "closure", kClosureForm,
                [&](ObjectReader& inner) { read_closure(inner, stair, closures); });
    if (reader.problem().found()) return;
    require_free(reader, before.steps(), stair.steps);
    if (zero && zero->after) require_free(reader, {zero_after(*zero)}, stair.steps);
    assemble(before, std::move(closures), zero, stair);
  });
}

}  // namespace loadstair::setup
