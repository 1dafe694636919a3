#include "analysis/limits/tables.h"

#include <algorithm>
#include <cmath>

#include "analysis/base/number.h"
#include "analysis/base/require.h"

namespace loadstair::limits {

namespace {

const Table& known_table(std::string_view id) {
  const Table* found = find_table(id);
  base::require(found != nullptr, "a table that the program is built with");
  return *found;
}

base::Refusal refusal(const Table& table, const Row& row, std::string reason) {
  std::string place{table.title};
  if (row.quantity == Quantity::harmonic) place += ", order " + base::print_integer(row.order);
  return {std::move(place), std::move(reason)};
}

std::string_view unit_text(LimitUnit unit) {
  switch (unit) {
    case LimitUnit::ampere:
    case LimitUnit::milliampere_per_watt:
      return "A";
    case LimitUnit::percent_of_fundamental:
    case LimitUnit::percent_times_power_factor:
      return "% of fundamental";
    case LimitUnit::percent_of_rated_current:
      return "% of rated current";
    case LimitUnit::percent_of_demand_current:
      return "% of demand current";
  }
  return "";
}

/// What a duration is to a person.
std::string duration_text(double seconds) {
  if (seconds >= 86400) return base::print_significant(seconds / 86400, 3) + " days";
  if (seconds >= 600) return base::print_significant(seconds / 60, 3) + " min";
  return base::print_significant(seconds, 3) + " s";
}

std::string name_of(const Table& table, const Row& row) {
  std::string out{table.title};
  if (!row.condition.empty()) out += " (" + std::string{row.condition} + ")";
  switch (row.quantity) {
    case Quantity::harmonic:
      return out + ", order " + base::print_integer(row.order);
    case Quantity::total_distortion:
      return out + ", total distortion";
    case Quantity::dc_injection:
      return out + ", direct current";
  }
  return out;
}

}  // namespace

const Table* find_table(std::string_view id) {
  const auto all = tables();
  const auto found = std::find_if(all.begin(), all.end(), [&](const Table& table) { return table.id == id; });
  return found == all.end() ? nullptr : &*found;
}

const Row* find_row(const Table& table, Quantity quantity, int order, std::string_view condition) {
  const auto found = std::find_if(table.rows.begin(), table.rows.end(), [&](const Row& row) {
    return row.quantity == quantity && row.order == order && row.condition == condition;
  });
  return found == table.rows.end() ? nullptr : &*found;
}

base::Outcome<Allowed> allowed_by(const Table& table, const Row& row, const Circumstances& circumstances) {
  const std::string_view unit = unit_text(row.unit);
  if (row.unit == LimitUnit::percent_times_power_factor) {
    if (!circumstances.power_factor) {
      return refusal(table, row, "the limit depends on the power factor, and none is known");
    }
    const double factor = *circumstances.power_factor;
    if (!(factor > 0 && factor <= 1)) return refusal(table, row, "the power factor is not within 0 to 1");
    return Allowed{row.limit * factor, unit};
  }
  if (row.unit == LimitUnit::milliampere_per_watt) {
    if (!circumstances.active_power_w) {
      return refusal(table, row, "the limit depends on the active input power, and none is known");
    }
    const double power = *circumstances.active_power_w;
    if (!(power > 0) || !std::isfinite(power))
      return refusal(table, row, "the active power is not above 0 W");
    const Row* ceiling = find_row(known_table("iec61000_3_2_class_a"), Quantity::harmonic, row.order);
    base::require(ceiling != nullptr, "class A has every order of class D");
    return Allowed{std::min(row.limit * power / 1000, ceiling->limit), unit};
  }
  return Allowed{row.limit, unit};
}

base::Outcome<double> class_d_limit_a(int order, double active_power_w) {
  const Table& table = known_table("iec61000_3_2_class_d");
  const Row* row = find_row(table, Quantity::harmonic, order);
  if (row == nullptr) {
    return base::Refusal{std::string{table.title},
                         "order " + base::print_integer(order) + " has no limit: odd orders 3 to 39 have"};
  }
  auto allowed = allowed_by(table, *row, {active_power_w, std::nullopt, 0});
  if (!allowed) return allowed.refusal();
  return allowed->limit;
}

base::Outcome<double> class_c_limit_percent(int order, double power_factor) {
  const Table& table = known_table("iec61000_3_2_class_c");
  const Row* row = find_row(table, Quantity::harmonic, order);
  if (row == nullptr) {
    return base::Refusal{std::string{table.title}, "order " + base::print_integer(order) +
                                                       " has no limit: orders 2 and odd 3 to 39 have"};
  }
  auto allowed = allowed_by(table, *row, {std::nullopt, power_factor, 0});
  if (!allowed) return allowed.refusal();
  return allowed->limit;
}

base::Outcome<Decision> decide(const Table& table, const Row& row, const estimate::Coverage& result,
                               const Circumstances& circumstances, const Rule& rule,
                               std::span<const double> draws) {
  auto allowed = allowed_by(table, row, circumstances);
  if (!allowed) return allowed.refusal();
  const Rule used{table.simple_acceptance ? 0 : rule.guard_factor};
  auto out = decide(result, {std::nullopt, allowed->limit}, allowed->unit, used, draws);
  if (!out) return base::Refusal{name_of(table, row), out.refusal().reason};
  Decision& decision = *out;
  if (row.status == Status::from_memory) {
    decision.verdict = Verdict::undecided;
    decision.text =
        "undecided: this row was written down from memory and decides nothing; state the limit as "
        "your own if you have the document. By it: " +
        decision.text;
  } else if (row.status == Status::one_copy) {
    decision.text += "; the row is confirmed by one copy only";
  }
  if (circumstances.record_s < table.observation_s) {
    decision.indicative = true;
    decision.text += "; indicative: recorded " + duration_text(circumstances.record_s) +
                     ", the table asks for " + duration_text(table.observation_s);
  }
  decision.text = name_of(table, row) + ": " + decision.text;
  return out;
}

}  // namespace loadstair::limits
