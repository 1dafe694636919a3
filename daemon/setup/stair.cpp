#include "daemon/setup/stair.h"

#include "analysis/base/number.h"
#include "daemon/setup/reading.h"
#include "daemon/setup/stair_parts.h"

namespace loadstair::setup {
namespace {

using document::Choice;
using document::kNotNegative;
using document::kPositive;
using document::ObjectReader;
using document::print_text;
using document::Problem;
using document::Type;

// No bench that one person tests on is beyond these.
constexpr document::Bounds kVoltage{0.0, 1e6, true};
constexpr document::Bounds kPower{0.0, 1e9, true};
constexpr document::Bounds kCelsius{-60.0, 200.0, false};

constexpr std::array kActions = {Choice<GuardAction>{"stop", GuardAction::stop},
                                 Choice<GuardAction>{"hold", GuardAction::hold},
                                 Choice<GuardAction>{"next", GuardAction::next}};
constexpr std::array kMissingActions = {Choice<MissingAction>{"ignore", MissingAction::ignore},
                                        Choice<MissingAction>{"stop", MissingAction::stop},
                                        Choice<MissingAction>{"hold", MissingAction::hold},
                                        Choice<MissingAction>{"next", MissingAction::next}};

void read_prototype(ObjectReader& reader, Stair& stair) {
  stair.prototype.name = reader.text("name", "\"name\": \"Marten\"");
  stair.prototype.revision = reader.text_or("revision", "");
  stair.prototype.unit = reader.text_or("unit", "");
}

void read_ratings(ObjectReader& reader, Stair& stair) {
  Ratings& ratings = stair.ratings;
  ratings.input_voltage_v = reader.number("input_voltage_v", kVoltage, "\"input_voltage_v\": 385");
  ratings.output_voltage_v = reader.number("output_voltage_v", kVoltage, "\"output_voltage_v\": 230");
  ratings.output_power_w = reader.number("output_power_w", kPower, "\"output_power_w\": 600");
  ratings.output_frequency_hz = reader.number_or("output_frequency_hz", {0.0, 1000.0}, 0.0);
  ratings.highest_ambient_c = reader.number_or("highest_ambient_c", kCelsius, 40.0);
  ratings.expected_efficiency_percent =
      reader.number_or("expected_efficiency_percent", {0.0, 100.0, true}, 95.0);
}

ElectricalSettle read_electrical(ObjectReader& reader) {
  ElectricalSettle settle;
  settle.channel = reader.text("channel", "\"channel\": \"output power\"");
  settle.slope_percent_per_min =
      reader.number("slope_percent_per_min", kPositive, "\"slope_percent_per_min\": 0.1");
  settle.window_s = reader.number("window_s", kPositiveWait, "\"window_s\": 60");
  return settle;
}

ThermalSettle read_thermal(ObjectReader& reader) {
  ThermalSettle settle;
  settle.channel = reader.text("channel", "\"channel\": \"heatsink\"");
  settle.change_k = reader.number("change_k", kPositive, "\"change_k\": 1");
  settle.window_s = reader.number("window_s", kPositiveWait, "\"window_s\": 300");
  settle.count = reader.integer_or("count", 1, 100, 1);
  settle.hold_s = reader.number_or("hold_s", kWait, 0.0);
  with_object(reader, "prediction", kPredictionForm, [&](ObjectReader& prediction) {
    settle.by_prediction = true;
    settle.prediction_tolerance_k = prediction.number_or("tolerance_k", kPositive, 1.0);
    settle.slowest_tau_s = prediction.number_or("slowest_tau_s", kWait, 0.0);
  });
  return settle;
}

void read_step(ObjectReader& reader, std::size_t index, Stair& stair) {
  Step step;
  step.written_at = "steps/" + base::print_integer(static_cast<std::int64_t>(index));
  step.label = reader.text("label", "\"label\": \"30 %\"");
  for (const Step& other : stair.steps) {
    if (other.label != step.label) continue;
    reader.complain("label", "the label " + print_text(step.label) + " is taken by another step" +
                                 (other.written_at == "staircase" ? " (of the staircase)" : "") +
                                 "; labels must differ");
  }
  step.load_w =
      reader.number("load_w", kNotNegative, "\"load_w\": 180 (the nominal output power of this step)");
  step.input_voltage_v = reader.maybe_number("input_voltage_v", kPositive);
  read_set_points(reader, step);
  read_conduct(reader, step);
  if (step.set.empty() && step.prompt.empty()) {
    reader.problem().report(reader.place(),
                            "this step changes nothing; give it \"set\" points, or a \"prompt\" for "
                            "the person at the bench");
  }
  stair.steps.push_back(std::move(step));
}

void read_guard(ObjectReader& reader, Stair& stair) {
  Guard guard;
  guard.name = reader.text("name", "\"name\": \"heatsink too hot\"");
  require_new(reader, "name", guard.name, names_of(stair.guards));
  guard.channel = reader.text("channel", "\"channel\": \"heatsink\"");
  guard.above = reader.maybe_number("above", document::kAnyNumber);
  guard.below = reader.maybe_number("below", document::kAnyNumber);
  if (reader.problem().found()) return;
  if (!guard.above && !guard.below) {
    reader.problem().report(reader.place(),
                            "the guard " + print_text(guard.name) +
                                " has neither \"above\" nor \"below\", so it would never trip; add a "
                                "limit, for example \"above\": 95");
  }
  if (guard.above && guard.below && *guard.below >= *guard.above) {
    reader.complain("below",
                    "\"below\" is not less than \"above\", so every value trips; the two may be swapped");
  }
  guard.debounce_s = reader.number_or("debounce_s", {0.0, 3600.0}, 0.0);
  guard.blanking_s = reader.number_or("blanking_s", {0.0, 3600.0}, 0.0);
  guard.action = reader.one_of<GuardAction>("action", kActions, GuardAction::stop);
  guard.missing = reader.one_of<MissingAction>("missing", kMissingActions, MissingAction::stop);
  guard.missing_after_s = reader.number_or("missing_after_s", {0.0, 3600.0}, 0.0);
  stair.guards.push_back(std::move(guard));
}

void read_head(ObjectReader& top, Stair& stair) {
  read_format(top);
  (void)top.required("prototype", Type::object,
                     R"("prototype": {"name": "Marten", "revision": "C", "unit": "C-003"})");
  (void)top.required(
      "ratings", Type::object,
      R"("ratings": {"input_voltage_v": 385, "output_voltage_v": 230, "output_power_w": 600})");
  with_object(top, "prototype", kPrototypeForm, [&](ObjectReader& reader) { read_prototype(reader, stair); });
  with_object(top, "ratings", kRatingsForm, [&](ObjectReader& reader) { read_ratings(reader, stair); });
  with_object(top, "environment", kEnvironmentForm,
              [&](ObjectReader& reader) { stair.ambient_c = reader.number_or("ambient_c", kCelsius, 23.0); });
  stair.load_tolerance_percent = top.number_or("load_tolerance_percent", {0.0, 100.0, true}, 2.0);
}

Stair read_top(const document::Value& document, const std::string& file, Problem& problem) {
  Stair stair;
  stair.file = file;
  ObjectReader top{document, kStairForm, problem};
  if (problem.found()) return stair;
  read_head(top, stair);
  if (problem.found()) return stair;
  with_object(top, "staircase", kStaircaseForm, [&](ObjectReader& reader) { read_staircase(reader, stair); });
  for_objects(top, "steps", kStepForm,
              [&](ObjectReader& reader, std::size_t index) { read_step(reader, index, stair); });
  if (stair.steps.empty()) {
    problem.report(top.place(),
                   "a stair file needs steps; add a \"staircase\" over load levels, or \"steps\"");
  }
  if (problem.found()) return stair;
  read_checks(top, stair);
  read_limits(top, stair);
  for_objects(top, "guards", kGuardForm,
              [&](ObjectReader& reader, std::size_t) { read_guard(reader, stair); });
  with_object(top, "end", kEndForm, [&](ObjectReader& reader) {
    stair.end.cool_down_s = reader.number_or("cool_down_s", kWait, 0.0);
    stair.end.discharge_s = reader.number_or("discharge_s", kWait, 0.0);
  });
  return stair;
}

}  // namespace

void read_set_points(ObjectReader& reader, Step& step) {
  for_objects(reader, "set", kSetPointForm, [&](ObjectReader& point_reader, std::size_t) {
    SetPoint point;
    point.control = point_reader.text("control", "\"control\": \"load\"");
    point.setting = point_reader.text("setting", "\"setting\": \"power\"");
    point.value = point_reader.number("value", document::kAnyNumber, "\"value\": 180");
    step.set.push_back(std::move(point));
  });
}

void read_conduct(ObjectReader& reader, Step& step) {
  step.prompt = reader.text_or("prompt", "");
  step.hand_action = reader.text_or("hand_action", "");
  if (!step.hand_action.empty() && step.prompt.empty()) {
    reader.complain("hand_action",
                    "a \"hand_action\" is what a rehearsed person does at a \"prompt\"; add the prompt");
  }
  step.soak_s = reader.number_or("soak_s", kWait, 0.0);
  with_object(reader, "settle", kSettleForm, [&](ObjectReader& settle) {
    with_object(settle, "electrical", kElectricalForm,
                [&](ObjectReader& criterion) { step.electrical = read_electrical(criterion); });
    with_object(settle, "thermal", kThermalForm,
                [&](ObjectReader& criterion) { step.thermal = read_thermal(criterion); });
    if (!step.electrical && !step.thermal) {
      settle.problem().report(settle.place(),
                              "a settle criterion needs \"electrical\" or \"thermal\", or both");
    }
    step.settle_limit_s =
        settle.number("limit_s", kPositiveWait, "\"limit_s\": 3600, so that no step waits for ever");
  });
  step.average_s = reader.number("average_s", kPositiveWait, "\"average_s\": 10");
  step.capture = reader.flag_or("capture", false);
}

base::Outcome<Stair> read_stair(std::string_view text, const std::string& file) {
  const auto document = document::parse(text, file);
  if (!document) return document.refusal();
  Problem problem{file};
  Stair stair = read_top(*document, file, problem);
  if (problem.found()) return problem.refusal();
  stair.text = std::string{text};
  return stair;
}

base::Outcome<Stair> load_stair(const std::string& file) {
  const auto text = load_text(file, "the stair file");
  if (!text) return text.refusal();
  return read_stair(*text, file);
}

}  // namespace loadstair::setup
