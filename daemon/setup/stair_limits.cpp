// What a run is measured against: limits of the stair file's own, the rule that decides them, and the
// prototype's overload circuit.
#include "analysis/base/number.h"
#include "daemon/setup/reading.h"
#include "daemon/setup/stair_parts.h"

namespace loadstair::setup {
namespace {

using document::Choice;
using document::kPositive;
using document::ObjectReader;
using document::print_text;

constexpr document::Bounds kPercent{0.0, 100.0, false};
constexpr std::array kSenses = {Choice<std::string_view>{"peak", "peak"},
                                Choice<std::string_view>{"rms", "rms"},
                                Choice<std::string_view>{"average", "average"}};

// A quantity that can have a limit.
struct Limited {
  std::string_view quantity;
  std::string_view unit;
  bool per_level;  ///< else one figure for the run
};
constexpr std::array kLimited = {
    Limited{"efficiency", "%", true},       Limited{"loss", "W", true},
    Limited{"input_power", "W", true},      Limited{"output_power", "W", true},
    Limited{"power_factor", "1", true},     Limited{"thd_voltage", "%", true},
    Limited{"thd_current", "%", true},      Limited{"crest_factor", "1", true},
    Limited{"frequency", "Hz", true},       Limited{"dc_component", "V", true},
    Limited{"no_load", "W", false},         Limited{"standby", "W", false},
    Limited{"european", "%", false},        Limited{"cec", "%", false},
    Limited{"load_regulation", "%", false}, Limited{"line_regulation", "%", false}};
constexpr std::array<std::string_view, 2> kOfPlaces = {"temperature", "hot"};

std::vector<std::string_view> known_quantities() {
  std::vector<std::string_view> known;
  for (const Limited& one : kLimited) known.push_back(one.quantity);
  known.insert(known.end(), {"temperature PLACE", "hot PLACE"});
  return known;
}

// The row of a quantity, also of "temperature heatsink"; nullopt: there is none.
std::optional<Limited> limited(std::string_view quantity) {
  for (const Limited& one : kLimited) {
    if (one.quantity == quantity) return one;
  }
  for (const std::string_view word : kOfPlaces) {
    if (quantity.size() > word.size() + 1 && quantity.starts_with(word) && quantity[word.size()] == ' ')
      return Limited{word, "degC", true};
  }
  return std::nullopt;
}

// Each result has one unit; a limit in another one would be compared with the wrong number.
void read_unit(ObjectReader& reader, Limit& limit) {
  const auto known = limited(limit.quantity);
  if (!known) {
    reader.complain("quantity", "there is no result " + print_text(limit.quantity) +
                                    document::suggest(limit.quantity, known_quantities()));
    return;
  }
  const std::string wanted{known->unit};
  limit.unit = plain_unit(reader, "unit", reader.text("unit", "\"unit\": " + print_text(wanted)));
  if (limit.unit == wanted) return;
  reader.complain("unit", "the result " + print_text(limit.quantity) + " has the unit " + wanted + ", not " +
                              limit.unit + "; write its limits in " + wanted);
}

void read_own_limit(ObjectReader& reader, Limit& limit) {
  limit.quantity = reader.text("quantity", "\"quantity\": \"efficiency\", or a \"table\"");
  if (!reader.problem().found()) read_unit(reader, limit);
  limit.low = reader.maybe_number("low", document::kAnyNumber);
  limit.high = reader.maybe_number("high", document::kAnyNumber);
  if (!limit.low && !limit.high) {
    reader.problem().report(reader.place(), "the limit " + print_text(limit.name) +
                                                " has neither \"low\" nor \"high\", so everything would "
                                                "pass; add one, for example \"low\": 96");
  }
  if (limit.low && limit.high && *limit.low >= *limit.high) {
    reader.complain("low", "\"low\" is not below \"high\", so nothing could pass; the two may be swapped");
  }
}

void read_table(ObjectReader& reader, Limit& limit) {
  limit.table = reader.text("table", "\"table\": \"iec61000_3_2_class_a\"");
  for (const auto key : {"quantity", "low", "high", "unit"}) {
    if (reader.has(key)) {
      reader.complain(key, "a limit is a \"table\" or has a " + print_text(key) +
                               " of its own, not both; remove one of the two");
    }
  }
}

void read_labels(ObjectReader& reader, const Stair& stair, Limit& limit) {
  limit.at = reader.texts_or_empty("at");
  if (reader.problem().found()) return;
  const auto known = limited(limit.quantity);
  if (reader.has("at") && known && !known->per_level) {
    reader.complain(
        "at", "the result " + print_text(limit.quantity) + " is one figure of the whole run; remove \"at\"");
  }
  if (reader.has("at") && limit.at.empty()) {
    reader.complain("at",
                    "the list of steps is empty, so this decides nothing; name labels, or leave \"at\" "
                    "out for every level");
  }
  std::vector<std::string_view> labels;
  for (const Step& step : stair.steps) {
    if (step.kind == StepKind::level) labels.emplace_back(step.label);
  }
  for (std::size_t i = 0; i < limit.at.size(); ++i) {
    if (contains(labels, limit.at[i])) continue;
    reader.problem().report(
        reader.find("at")->items[i].place,
        "there is no level " + print_text(limit.at[i]) + document::suggest(limit.at[i], labels));
    return;
  }
}

void read_limit(ObjectReader& reader, Stair& stair) {
  Limit limit;
  limit.name = reader.text("name", "\"name\": \"efficiency at full load\"");
  require_new(reader, "name", limit.name, names_of(stair.limits));
  if (reader.has("table")) {
    read_table(reader, limit);
  } else {
    read_own_limit(reader, limit);
  }
  if (!reader.problem().found()) read_labels(reader, stair, limit);
  stair.limits.push_back(std::move(limit));
}

Overload read_overload(ObjectReader& reader) {
  Overload overload;
  overload.sense = std::string{reader.one_of<std::string_view>("sense", kSenses, "peak")};
  overload.threshold_v = reader.number("threshold_v", kPositive, "\"threshold_v\": 0.5");
  overload.sense_ohm = reader.number("sense_ohm", kPositive, "\"sense_ohm\": 0.1");
  overload.threshold_tolerance_percent = reader.maybe_number("threshold_tolerance_percent", kPercent);
  overload.sense_tolerance_percent = reader.maybe_number("sense_tolerance_percent", kPercent);
  return overload;
}

}  // namespace

void read_limits(ObjectReader& top, Stair& stair) {
  for_objects(top, "limits", kLimitForm,
              [&](ObjectReader& reader, std::size_t) { read_limit(reader, stair); });
  with_object(top, "decision", kDecisionForm, [&](ObjectReader& reader) {
    // Beyond a few times the expanded uncertainty nothing would ever pass: a slip.
    stair.guard_factor = reader.number("guard_factor", {0.0, 10.0}, "\"guard_factor\": 1");
  });
  with_object(top, "overload", kOverloadForm,
              [&](ObjectReader& reader) { stair.overload = read_overload(reader); });
}

}  // namespace loadstair::setup
