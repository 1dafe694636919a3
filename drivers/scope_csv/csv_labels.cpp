#include "drivers/scope_csv/csv_labels.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <cstdint>
#include <utility>

#include "analysis/base/number.h"
#include "drivers/scope_csv/csv_field.h"
#include "drivers/scope_csv/csv_text.h"

namespace loadstair::scope_csv {
namespace {

struct UnitWord {
  std::string_view word;  ///< lower case
  double scale;
  std::string_view unit;
};

constexpr std::array kUnitWords = {
    UnitWord{"volt", 1.0, "V"},         UnitWord{"volts", 1.0, "V"},         UnitWord{"millivolt", 1e-3, "V"},
    UnitWord{"millivolts", 1e-3, "V"},  UnitWord{"amp", 1.0, "A"},           UnitWord{"amps", 1.0, "A"},
    UnitWord{"ampere", 1.0, "A"},       UnitWord{"amperes", 1.0, "A"},       UnitWord{"milliamps", 1e-3, "A"},
    UnitWord{"watt", 1.0, "W"},         UnitWord{"watts", 1.0, "W"},         UnitWord{"sec", 1.0, "s"},
    UnitWord{"second", 1.0, "s"},       UnitWord{"seconds", 1.0, "s"},       UnitWord{"msec", 1e-3, "s"},
    UnitWord{"millisecond", 1e-3, "s"}, UnitWord{"milliseconds", 1e-3, "s"}, UnitWord{"usec", 1e-6, "s"},
    UnitWord{"microsecond", 1e-6, "s"}, UnitWord{"microseconds", 1e-6, "s"}, UnitWord{"nsec", 1e-9, "s"},
    UnitWord{"nanosecond", 1e-9, "s"},  UnitWord{"nanoseconds", 1e-9, "s"},
};

bool is_number(std::string_view text, char mark) {
  return read_field(text, mark).kind == FieldKind::kNumber;
}

/// "x", "y": the text without one pair of brackets around it.
std::string_view without_brackets(std::string_view text) {
  if (text.size() < 2) return text;
  const bool paired =
      (text.front() == '(' && text.back() == ')') || (text.front() == '[' && text.back() == ']') ||
      (text.front() == '{' && text.back() == '}') || (text.front() == '<' && text.back() == '>');
  return paired ? trimmed(text.substr(1, text.size() - 2)) : text;
}

/// "Voltage (V)", "Voltage [V]", "Voltage / V", "Voltage in V": where the name ends and the unit begins.
struct NameAndUnit {
  std::string_view name;
  std::string_view unit;  ///< empty when the text has none
};

NameAndUnit split_name(std::string_view text) {
  if (!text.empty() && (text.back() == ')' || text.back() == ']')) {
    const auto open = text.rfind(text.back() == ')' ? '(' : '[');
    if (open != std::string_view::npos && open > 0) {
      const auto inside = trimmed(text.substr(open + 1, text.size() - open - 2));
      if (read_unit(inside)) return {trimmed(text.substr(0, open)), inside};
    }
  }
  for (const std::string_view mark : {"/", " in ", ","}) {
    const auto at = text.rfind(mark);
    if (at == std::string_view::npos || at == 0) continue;
    const auto behind = without_brackets(trimmed(text.substr(at + mark.size())));
    if (!behind.empty() && read_unit(behind)) return {trimmed(text.substr(0, at)), behind};
  }
  return {text, {}};
}

// --- Which of the lines above the data names the columns, and which gives their units ---

class LabelReader {
 public:
  LabelReader(const Layout& layout, std::string_view file_name, const Options& options)
      : layout_{layout}, file_name_{file_name}, options_{options} {}

  base::Outcome<Labels> read() {
    if (auto placed = place_lines(); !placed) return placed.refusal();
    name_columns();
    for (std::size_t line = 1; line < layout_.data_line; ++line) {
      if (line != labels_.header_line && line != labels_.unit_line) read_fact(line);
    }
    use_vertical_units();
    return std::move(labels_);
  }

 private:
  std::vector<Field> fields_of(std::size_t line) const {
    auto fields = split_fields(layout_.head[line - 1], layout_.separator);
    fields.resize(filled_fields(fields));
    return fields;
  }

  /// As many fields as columns, each a known unit or empty, one unit at least.
  bool is_unit_line(std::size_t line) const {
    if (line == 0) return false;
    const auto fields = fields_of(line);
    const std::size_t least = std::min<std::size_t>(layout_.columns, 2);
    return fields.size() >= least && fields.size() <= layout_.columns &&
           std::all_of(fields.begin(), fields.end(), [](const Field& field) {
             return field.text.empty() || read_unit(field.text).has_value();
           });
  }

  /// As many texts as columns. Above a line of units a name may be a number ("x-axis,1,2").
  bool is_header_line(std::size_t line, bool numbers_allowed) const {
    if (line == 0) return false;
    const auto fields = fields_of(line);
    if (fields.size() != layout_.columns) return false;
    std::size_t numbers = 0;
    for (const Field& field : fields) {
      if (is_number(field.text, layout_.decimal_mark)) ++numbers;
    }
    if (numbers == fields.size() || (numbers > 0 && !numbers_allowed)) return false;
    return layout_.columns > 1 || !holds_fact(fields[0].text);
  }

  /// "interval = 1e-5", "rate: 50 kHz": above a single column that is preamble, not its name.
  static bool holds_fact(std::string_view text) {
    const auto mark = text.find_first_of("=:");
    return mark != std::string_view::npos && text.find_first_of("0123456789", mark) != std::string_view::npos;
  }

  base::Outcome<void> place_lines() {
    const std::size_t above = layout_.data_line - 1;
    const std::size_t second = above > 0 ? above - 1 : 0;
    labels_.unit_line = is_unit_line(above)                                    ? above
                        : is_unit_line(second) && is_header_line(above, false) ? second
                                                                               : 0;
    if (options_.unit_line) labels_.unit_line = *options_.unit_line;
    const std::size_t candidate = labels_.unit_line == above ? second : above;
    if (is_header_line(candidate, labels_.unit_line != 0)) labels_.header_line = candidate;
    if (options_.header_line) labels_.header_line = *options_.header_line;
    for (const auto& [given, line, what] : {std::tuple{options_.header_line, labels_.header_line, "names"},
                                            std::tuple{options_.unit_line, labels_.unit_line, "units"}}) {
      if (!given || line == 0) continue;
      if (line >= layout_.data_line) {
        return refusal_at(file_name_, layout_.data_line, "", 0,
                          "the data begins here; the line of " + std::string{what} + " was given as " +
                              text_of(line) + " and must lie above");
      }
      const auto fields = fields_of(line);
      if (fields.size() == layout_.columns) continue;
      return refusal_at(file_name_, line, layout_.head[line - 1], 0,
                        "the line of " + std::string{what} + " has " + counted(fields.size(), "field") +
                            ", but the rows have " + text_of(layout_.columns));
    }
    if (labels_.header_line == 0 && !options_.header_line) remark_unused_names(candidate);
    return {};
  }

  void remark_unused_names(std::size_t line) {
    if (line == 0) return;
    const auto fields = fields_of(line);
    const bool all_text = std::none_of(fields.begin(), fields.end(), [&](const Field& field) {
      return field.text.empty() || is_number(field.text, layout_.decimal_mark);
    });
    if (fields.size() < 2 || fields.size() == layout_.columns || !all_text) return;
    labels_.remarks.push_back("Line " + text_of(line) + " looks like names, but has " +
                              text_of(fields.size()) + " for " + counted(layout_.columns, "column") +
                              "; it is not used.");
  }

  void name_columns() {
    const auto names = labels_.header_line != 0 ? fields_of(labels_.header_line) : std::vector<Field>{};
    const auto units = labels_.unit_line != 0 ? fields_of(labels_.unit_line) : std::vector<Field>{};
    for (std::size_t k = 0; k < layout_.columns; ++k) {
      ColumnLabel label;
      if (k < names.size()) {
        const std::string text = field_name(names[k]);
        const auto split = split_name(text);
        label.name = split.name;
        label.written_unit = split.unit;
      }
      if (k < units.size() && !units[k].text.empty()) {
        label.written_unit = clean_text(without_brackets(units[k].text));
      }
      // A line of units alone ("Seconds,Volts") also names its columns.
      if (names.empty() && k < units.size()) label.name = field_name(units[k]);
      label.unit = read_unit(label.written_unit);
      label.is_named = !label.name.empty();
      if (!label.is_named) label.name = "column " + text_of(k + 1);
      labels_.columns.push_back(std::move(label));
    }
  }

  // --- The facts of the preamble: "key, value[, unit]", "key = value unit", "key: value unit" ---

  struct Fact {
    std::string key;       ///< lower case, without a unit in brackets and without comment signs
    std::string key_unit;  ///< "s" of "Interval (s)"
    std::vector<std::string> values;
  };

  Fact split_fact(std::size_t line) const {
    std::string_view text = layout_.head[line - 1];
    while (!text.empty() && std::string_view{"#%;!/*\" \t"}.find(text.front()) != std::string_view::npos)
      text.remove_prefix(1);
    const auto fields = split_fields(text, layout_.separator);
    Fact fact;
    std::string_view key = fields[0].text;
    const auto mark = key.find_first_of("=:\t");
    if (mark != std::string_view::npos && mark > 0) {
      const auto value = trimmed(key.substr(mark + 1));
      if (!value.empty()) fact.values.push_back(clean_text(value));
      key = trimmed(key.substr(0, mark));
    }
    for (std::size_t k = 1; k < fields.size(); ++k) fact.values.push_back(field_name(fields[k]));
    while (!key.empty() && (key.back() == '"' || key.back() == ':' || key.back() == '='))
      key = trimmed(key.substr(0, key.size() - 1));
    const auto split = split_name(key);
    fact.key = lower(clean_text(split.name));
    fact.key_unit = clean_text(split.unit);
    std::replace(fact.key.begin(), fact.key.end(), '_', ' ');
    return fact;
  }

  /// "20 us" and "20","us" and "2e-05": the number in base units, with its unit or the one given.
  struct Quantity {
    double value = 0.0;
    std::string unit;
  };

  std::optional<Quantity> read_quantity(const Fact& fact, std::size_t at) const {
    if (at >= fact.values.size()) return std::nullopt;
    const std::string_view text = fact.values[at];
    std::size_t length = text.size();
    std::optional<double> number;
    for (; length > 0 && !number; --length) {
      const auto head = text.substr(0, length);
      number = base::parse_number(head, layout_.decimal_mark);
      if (!number) number = base::parse_number(head, layout_.decimal_mark == ',' ? '.' : ',');
      if (number) break;
    }
    if (!number) return std::nullopt;
    std::string unit{trimmed(text.substr(length))};
    if (unit.empty()) unit = fact.key_unit;
    if (unit.empty() && at + 1 < fact.values.size() &&
        (read_unit(fact.values[at + 1]) || is_rate(fact.values[at + 1]))) {
      unit = fact.values[at + 1];
    }
    if (unit.empty()) return Quantity{*number, ""};
    for (const std::string_view samples : {"Sa/s", "S/s", "samples/s", "Samples/s"}) {
      if (unit.ends_with(samples)) unit = unit.substr(0, unit.size() - samples.size()) + "Hz";
    }
    if (const auto parsed = read_unit(unit)) return Quantity{in_base(*number, parsed->scale), parsed->unit};
    return std::nullopt;
  }

  static bool is_rate(std::string_view unit) { return unit.ends_with("Sa/s") || unit.ends_with("S/s"); }

  void read_fact(std::size_t line) {
    static constexpr std::array<std::string_view, 19> kIntervals = {"sample interval",
                                                                    "sampling interval",
                                                                    "sample period",
                                                                    "sampling period",
                                                                    "interval",
                                                                    "time interval",
                                                                    "x increment",
                                                                    "xincrement",
                                                                    "x inc",
                                                                    "xinc",
                                                                    "dt",
                                                                    "delta t",
                                                                    "increment",
                                                                    "time increment",
                                                                    "horizontal interval",
                                                                    "time per sample",
                                                                    "time step",
                                                                    "delta",
                                                                    "horizontal increment"};
    static constexpr std::array<std::string_view, 7> kRates = {
        "sample rate", "sampling rate", "sampling frequency", "sample frequency", "samplerate",
        "fs",          "sampling"};
    static constexpr std::array<std::string_view, 8> kStarts = {
        "x origin", "xorigin", "x zero", "xzero", "first sample", "start time", "time origin", "t0"};
    static constexpr std::array<std::string_view, 7> kCounts = {
        "record length", "samples",      "number of samples", "number of points",
        "points",        "sample count", "memory length"};
    const Fact fact = split_fact(line);
    const auto is_one_of = [&](const auto& keys) {
      return std::find(keys.begin(), keys.end(), fact.key) != keys.end();
    };
    const auto first = read_quantity(fact, 0);
    if (fact.key.starts_with("vertical unit") || fact.key.starts_with("y unit"))
      vertical_units_ = fact.values;
    if (!first) return;
    const bool in_time = first->unit.empty() || first->unit == "s";
    const bool in_rate = first->unit.empty() || first->unit == "Hz";
    if (is_one_of(kIntervals) && in_time) {
      for (std::size_t at = 0; at < fact.values.size(); ++at) {
        const auto quantity = read_quantity(fact, at);
        if (quantity && quantity->value > 0.0) labels_.intervals.push_back({quantity->value, line});
      }
    } else if (is_one_of(kRates) && in_rate && first->value > 0.0) {
      labels_.intervals.push_back({1.0 / first->value, line});
    } else if (is_one_of(kStarts) && in_time) {
      labels_.stated_start_s = first->value;
    } else if (is_one_of(kCounts) && first->unit.empty() && first->value >= 1.0 && first->value < 1e15) {
      labels_.stated_rows = static_cast<std::size_t>(std::llround(first->value));
    }
  }

  /// "Vertical Units,V,A" in the preamble, for columns that nothing else gives a unit.
  void use_vertical_units() {
    std::size_t next = 0;
    const bool one_for_all = vertical_units_.size() == 1;
    for (auto& label : labels_.columns) {
      if (label.unit || is_time_name(label.name)) continue;
      if (next >= vertical_units_.size()) return;
      label.written_unit = vertical_units_[next];
      label.unit = read_unit(label.written_unit);
      if (!one_for_all) ++next;
    }
  }

  const Layout& layout_;
  std::string_view file_name_;
  const Options& options_;
  Labels labels_;
  std::vector<std::string> vertical_units_;
};

template <class Names>
bool is_listed(const Names& names, std::string_view name) {
  const std::string low = lower(name);
  return std::find(names.begin(), names.end(), low) != names.end();
}

}  // namespace

std::optional<base::ParsedUnit> read_unit(std::string_view text) {
  text = without_brackets(trimmed(text));
  if (text.empty()) return std::nullopt;
  if (auto unit = base::parse_unit(text)) return unit;
  const std::string word = lower(text);
  for (const auto& known : kUnitWords) {
    if (known.word == word) return base::ParsedUnit{known.scale, std::string{known.unit}};
  }
  const std::string utf8 = clean_text(text);
  return utf8 == text ? std::nullopt : base::parse_unit(utf8);
}

base::Outcome<Labels> read_labels(const Layout& layout, std::string_view file_name, const Options& options) {
  return LabelReader{layout, file_name, options}.read();
}

bool is_time_name(std::string_view name) {
  static constexpr std::array<std::string_view, 14> kNames = {
      "t",      "time",   "times", "second", "seconds", "sec",      "x",
      "x-axis", "x axis", "zeit",  "temps",  "tiempo",  "timebase", "time base"};
  if (is_listed(kNames, name)) return true;
  const std::string low = lower(name);
  return low.size() > 4 && low.starts_with("time") && !(low[4] >= 'a' && low[4] <= 'z');
}

bool is_counter_name(std::string_view name) {
  static constexpr std::array<std::string_view, 13> kNames = {
      "index", "sample", "samples", "sample no", "sample no.", "no",           "no.",
      "n",     "#",      "point",   "points",    "number",     "sample number"};
  return is_listed(kNames, name);
}

}  // namespace loadstair::scope_csv
