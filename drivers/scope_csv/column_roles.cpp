#include "drivers/scope_csv/column_roles.h"

#include <algorithm>
#include <cmath>
#include <cstdint>
#include <utility>

#include "analysis/base/number.h"
#include "drivers/scope_csv/csv_field.h"
#include "drivers/scope_csv/csv_text.h"
#include "drivers/scope_csv/time_axis.h"

namespace loadstair::scope_csv {
namespace {

constexpr std::size_t kRowsLookedAt = 200;

bool is_time_unit(const ColumnLabel& label) {
  return label.unit && label.unit->unit == "s";
}

std::string described(const Labels& labels, std::size_t column) {
  const auto& label = labels.columns[column];
  return "column " + text_of(column + 1) + (label.is_named ? ", " + shown(label.name) + "," : "");
}

std::string capital(std::string text) {
  if (!text.empty() && text[0] >= 'a' && text[0] <= 'z') text[0] = static_cast<char>(text[0] - 'a' + 'A');
  return text;
}

/// The first rows of a column as the head shows them, up to the first field that is no number.
struct FirstValues {
  std::vector<double> values;
  int digits = 1;
};

FirstValues first_values(const Layout& layout, std::size_t column) {
  FirstValues first;
  const std::size_t stop = std::min(layout.head.size(), layout.data_line - 1 + kRowsLookedAt);
  for (std::size_t at = layout.data_line - 1; at < stop; ++at) {
    const auto fields = split_fields(layout.head[at], layout.separator);
    if (column >= fields.size()) break;
    const auto value = read_field(fields[column].text, layout.decimal_mark);
    if (value.kind != FieldKind::kNumber) break;
    first.values.push_back(value.value);
    first.digits = std::max(first.digits, significant_digits(fields[column].text));
  }
  return first;
}

bool rises_evenly(const FirstValues& first) {
  return first.values.size() >= 3 && !check_times(first.values, first.digits).fault;
}

/// 0, 1, 2 ... or 1, 2, 3 ...
bool counts_samples(const FirstValues& first) {
  if (first.values.size() < 2 || (first.values[0] != 0.0 && first.values[0] != 1.0)) return false;
  for (std::size_t k = 1; k < first.values.size(); ++k) {
    if (first.values[k] != first.values[k - 1] + 1.0) return false;
  }
  return true;
}

class RoleFinder {
 public:
  RoleFinder(const Layout& layout, const Labels& labels, std::string_view file_name, const Options& options)
      : layout_{layout}, labels_{labels}, file_name_{file_name}, options_{options} {}

  base::Outcome<ColumnRoles> find() {
    auto found = options_.time_column ? by_option() : by_label();
    if (!found) return found.refusal();
    if (!roles_.time && roles_.left_out.empty() && !options_.time_column) look_at_first_column();
    if (options_.interval_s) drop_times();
    if (auto given = interval_is_given(); !given) return given.refusal();
    if (auto checked = check_time_unit(); !checked) return checked.refusal();
    for (std::size_t k = 0; k < labels_.columns.size(); ++k) {
      if (!has_role(k)) roles_.channels.push_back(k);
    }
    if (roles_.channels.empty()) {
      return at_data("the file has a time column but no channel; a column of samples is wanted");
    }
    return std::move(roles_);
  }

 private:
  base::Refusal at_data(std::string reason) const {
    return refusal_at(file_name_, layout_.data_line, "", 0, std::move(reason));
  }

  bool has_role(std::size_t column) const {
    const auto holds = [&](const auto& list) {
      return std::find(list.begin(), list.end(), column) != list.end();
    };
    return roles_.time == column || holds(roles_.other_times) || holds(roles_.left_out);
  }

  base::Outcome<void> by_option() {
    if (*options_.time_column == "none") return {};
    std::vector<std::string> names;
    for (const auto& label : labels_.columns) names.push_back(label.name);
    const auto column = find_column(names, *options_.time_column);
    if (!column) return at_data("the time column: " + column.refusal().reason);
    roles_.time = *column;
    return {};
  }

  base::Outcome<void> by_label() {
    for (std::size_t k = 0; k < labels_.columns.size(); ++k) {
      const auto& label = labels_.columns[k];
      // "x" may be in volts, "time" may not: check_time_unit refuses it.
      const bool by_name = label.is_named && is_time_name(label.name) &&
                           (!label.unit || is_time_unit(label) || lower(label.name).starts_with("time"));
      if (by_name || is_time_unit(label)) {
        if (roles_.time) {
          roles_.other_times.push_back(k);
        } else {
          roles_.time = k;
        }
      } else if (k == 0 && label.is_named && is_counter_name(label.name)) {
        roles_.left_out.push_back(k);
        roles_.remarks.push_back(capital(described(labels_, k)) + " counts samples and is left out.");
      }
    }
    return {};
  }

  /// Nothing names a time: the first column may still be one by its values.
  void look_at_first_column() {
    const auto& label = labels_.columns[0];
    const bool has_other_unit = label.unit && !is_time_unit(label);
    if (labels_.columns.size() < 2 || has_other_unit) return;
    const auto first = first_values(layout_, 0);
    if (!rises_evenly(first)) return;
    const bool interval_stated = options_.interval_s || !labels_.intervals.empty();
    const double step =
        (first.values.back() - first.values.front()) / static_cast<double>(first.values.size() - 1);
    if (counts_samples(first)) {
      // A count, or seconds: only a stated interval tells.
      if (!interval_stated) return;
      roles_.left_out.push_back(0);
      roles_.remarks.push_back(capital(described(labels_, 0)) + " counts samples and is left out.");
    } else if (!interval_stated || (!labels_.intervals.empty() &&
                                    std::abs(step - labels_.intervals[0].interval_s) < 0.1 * step)) {
      roles_.time = 0;
      roles_.remarks.push_back(capital(described(labels_, 0)) +
                               " is taken for the time since it rises evenly; nothing in the file says so.");
    }
  }

  /// The caller's interval stands in the place of all times.
  void drop_times() {
    if (!roles_.time) return;
    roles_.remarks.push_back("The times in " + described(labels_, *roles_.time) +
                             " are not used since the interval was given.");
    roles_.left_out.push_back(*roles_.time);
    roles_.left_out.insert(roles_.left_out.end(), roles_.other_times.begin(), roles_.other_times.end());
    roles_.other_times.clear();
    roles_.time.reset();
  }

  base::Outcome<void> interval_is_given() const {
    if (roles_.time || options_.interval_s) return {};
    if (labels_.intervals.empty()) {
      const bool is_count = counts_samples(first_values(layout_, 0));
      return at_data(
          std::string{is_count ? "column 1 counts up by one, which may be samples or seconds"
                               : "no column is named or rises like a time"} +
          ", and no line above states a sampling interval or rate; say the interval (--interval) or the "
          "time column (--time-column)");
    }
    const auto& first = labels_.intervals.front();
    for (const auto& other : labels_.intervals) {
      if (std::abs(other.interval_s - first.interval_s) <= 1e-3 * first.interval_s) continue;
      return refusal_at(file_name_, other.line, "", 0,
                        "this line states a sampling interval of " + short_number(other.interval_s) +
                            " s, but line " + text_of(first.line) + " one of " +
                            short_number(first.interval_s) + " s; say which is right (--interval)");
    }
    return {};
  }

  base::Outcome<void> check_time_unit() const {
    if (!roles_.time) return {};
    const auto& label = labels_.columns[*roles_.time];
    if (label.written_unit.empty() || is_time_unit(label)) return {};
    const std::size_t line = labels_.unit_line != 0 ? labels_.unit_line : labels_.header_line;
    return refusal_at(file_name_, line, "", 0,
                      "the time in " + described(labels_, *roles_.time) + " has the unit " +
                          shown(label.written_unit) + "; s, ms, \u00b5s or ns would be right");
  }

  const Layout& layout_;
  const Labels& labels_;
  std::string_view file_name_;
  const Options& options_;
  ColumnRoles roles_;
};

}  // namespace

base::Outcome<ColumnRoles> find_roles(const Layout& layout, const Labels& labels, std::string_view file_name,
                                      const Options& options) {
  return RoleFinder{layout, labels, file_name, options}.find();
}

base::Outcome<std::size_t> find_column(const std::vector<std::string>& names, std::string_view wanted) {
  const bool is_hash = wanted.starts_with('#');
  const auto number = base::parse_integer(is_hash ? wanted.substr(1) : wanted);
  const bool is_number = number && *number >= 1 && static_cast<std::size_t>(*number) <= names.size();
  const std::size_t by_number = is_number ? static_cast<std::size_t>(*number - 1) : names.size();
  const auto count = static_cast<std::size_t>(std::count(names.begin(), names.end(), wanted));
  if (count > 1) {
    return base::Refusal{"", counted(count, "column") + " are named " + shown(wanted) +
                                 "; give its number, from #1 to #" + text_of(names.size())};
  }
  if (count == 1) {
    const auto by_name =
        static_cast<std::size_t>(std::find(names.begin(), names.end(), wanted) - names.begin());
    if (!is_number || is_hash || by_name == by_number) return by_name;
    return base::Refusal{"", shown(wanted) + " is the name of column " + text_of(by_name + 1) +
                                 " and the number of another; say #" + text_of(by_name + 1) + " or #" +
                                 text_of(by_number + 1)};
  }
  if (is_number) return by_number;
  std::string at_hand;
  for (std::size_t k = 0; k < std::min<std::size_t>(names.size(), 20); ++k) {
    at_hand += (k == 0 ? "" : ", ") + shown(names[k]);
  }
  return base::Refusal{"", "there is no column " + shown(wanted) + "; there are " + at_hand +
                               ", or numbers from 1 to " + text_of(names.size())};
}

}  // namespace loadstair::scope_csv
