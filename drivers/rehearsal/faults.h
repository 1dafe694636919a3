// What goes wrong on a rehearsed bench, and when: a short list, given beforehand or while it runs.
#pragma once

#include <cstdint>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"

namespace loadstair::rehearsal {

enum class FaultKind {
  silence,         ///< no reply, no line
  late,            ///< the reply comes `delay_s` later than it should
  garbage,         ///< random bytes in its place, line end included
  truncated,       ///< the first half of the reply, line end included
  duplicate,       ///< the reply twice
  stale,           ///< the reply before it again
  overload,        ///< the instrument's word or number for overload
  unit_change,     ///< somebody turned the knob: another unit or function
  wrong_identity,  ///< something else answers the identity query
  vanish,          ///< link closed and gone for `length_s`, then back
};
[[nodiscard]] std::string_view name_of(FaultKind kind);

/// One fault. It starts at `at_s` and lasts `length_s`, or it takes `count` replies from the query number
/// `at_query` on (queries of that instrument count from 1, lines of a text-line meter too).
struct Fault {
  std::string instrument;
  FaultKind kind = FaultKind::silence;
  std::optional<double> at_s;  ///< since the bench started
  std::optional<std::int64_t> at_query;
  double length_s = 1.0;
  std::int64_t count = 1;
  double delay_s = 2.0;  ///< late replies only
};

/// Reads a script, one fault a line: `INSTRUMENT KIND at=12.5 length=3`, `INSTRUMENT late query=40 count=2
/// delay=1.5`. Blank lines and lines that start with '#' are skipped. Refusal: "line 3: ..." with what would
/// be right.
[[nodiscard]] base::Outcome<std::vector<Fault>> parse_faults(std::string_view text);

/// The faults of one instrument, asked once a reply.
class FaultPlan {
 public:
  FaultPlan() = default;
  explicit FaultPlan(std::vector<Fault> faults) : faults_{std::move(faults)} {}

  void add(Fault fault) { faults_.push_back(std::move(fault)); }
  /// The fault of `kind` that covers this instant or this query, if any.
  [[nodiscard]] const Fault* covering(FaultKind kind, double time_s, std::int64_t query) const;
  /// The first fault that alters a reply (any kind but vanish and wrong_identity).
  [[nodiscard]] const Fault* altering(double time_s, std::int64_t query) const;
  [[nodiscard]] const std::vector<Fault>& all() const { return faults_; }

 private:
  std::vector<Fault> faults_;
};

}  // namespace loadstair::rehearsal
