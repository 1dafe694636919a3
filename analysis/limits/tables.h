// Limit tables: data files in tables/, turned into arrays when the program is built.
#pragma once

#include <optional>
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/limits/limits.h"

namespace loadstair::limits {

enum class Quantity { harmonic, total_distortion, dc_injection };

enum class LimitUnit {
  ampere,
  milliampere_per_watt,  ///< of active input power, and never above what class A allows
  percent_of_fundamental,
  percent_times_power_factor,  ///< of the fundamental: limit times the circuit's power factor
  percent_of_rated_current,
  percent_of_demand_current  ///< of the greatest demand load current
};

/// confirmed: independent copies agree; one_copy: one copy was seen; from_memory: none was, and the row
/// decides nothing.
enum class Status { confirmed, one_copy, from_memory };

struct Row {
  Quantity quantity = Quantity::harmonic;
  int order = 0;  ///< of a harmonic; 0 otherwise
  double limit = 0;
  LimitUnit unit = LimitUnit::ampere;
  std::string_view condition;  ///< which part of the table; empty where it has one part only
  Status status = Status::from_memory;
};

struct Table {
  std::string_view id;  ///< "iec61000_3_2_class_a"
  std::string_view title;
  std::string_view source;         ///< document and edition, and how it was confirmed
  std::string_view applicability;  ///< to what it applies, for a person to judge
  double observation_s =
      0;  ///< a shorter record is indicative only; 0: the document's rule is not known here
  bool simple_acceptance = false;  ///< whether the document itself prescribes r = 0
  std::span<const Row> rows;
};

[[nodiscard]] std::span<const Table> tables();
/// nullptr when there is none of that id.
[[nodiscard]] const Table* find_table(std::string_view id);
/// nullptr when the table has no such row.
[[nodiscard]] const Row* find_row(const Table& table, Quantity quantity, int order,
                                  std::string_view condition = {});

/// What a limit may depend on; empty where nobody knows.
struct Circumstances {
  std::optional<double> active_power_w;  ///< input power, for mA/W
  std::optional<double> power_factor;    ///< of the circuit, for 30 lambda
  double record_s = 0;                   ///< how long was recorded
};

/// A limit as a number, in the unit of the quantity ("A", "% of fundamental", "% of rated current", ...).
struct Allowed {
  double limit = 0;
  std::string_view unit;
};

/// Errors: refused when the row needs a power or a power factor that is not given or impossible.
[[nodiscard]] base::Outcome<Allowed> allowed_by(const Table& table, const Row& row,
                                                const Circumstances& circumstances);

/// Class D: the smaller of mA/W times the power and the limit of class A, A. order odd, 3 to 39; power above
/// zero. Errors: refused otherwise. Source: IEC 61000-3-2, table 3.
[[nodiscard]] base::Outcome<double> class_d_limit_a(int order, double active_power_w);

/// Class C above 25 W, % of the fundamental: order 3 is 30 times the power factor. Errors: refused for an
/// order without a limit or a power factor outside (0, 1]. Source: IEC 61000-3-2, table 2 (editions to 2014).
[[nodiscard]] base::Outcome<double> class_c_limit_percent(int order, double power_factor);

/// Holds a result against a row. A row from memory gives "undecided" and says so, whatever the result; a
/// record shorter than the table's observation time gives a decision that is "indicative". Simple acceptance
/// where the table prescribes it, the report's rule elsewhere.
/// result   in the unit of allowed_by()
/// Errors:  as allowed_by() and decide().
[[nodiscard]] base::Outcome<Decision> decide(const Table& table, const Row& row,
                                             const estimate::Coverage& result,
                                             const Circumstances& circumstances, const Rule& rule = {},
                                             std::span<const double> draws = {});

}  // namespace loadstair::limits
