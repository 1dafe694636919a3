#include "analysis/estimate/budget.h"

#include <algorithm>
#include <cmath>
#include <string_view>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/estimate/sharing.h"

namespace loadstair::estimate {

namespace {

std::string_view action_text(Remedy remedy) {
  switch (remedy) {
    case Remedy::none:
      return "";
    case Remedy::another_range:
      return "use a range nearer to the reading";
    case Remedy::tie_check:
      return "tie check against a better meter";
    case Remedy::sensing_wires:
      return "sense the voltage at the converter's terminals by separate wires";
    case Remedy::longer_window:
      return "average over a window four times as long";
    case Remedy::capture:
      return "take a capture in this step";
    case Remedy::declare_tolerance:
      return "measure the resistance and declare its tolerance";
  }
  return "";
}

struct Line {
  BudgetLine line;
  double largest = 0;
  const Source* source = nullptr;  ///< of the largest contribution
  Remedy remedy = Remedy::none;
};

bool is_one_meter(const Owner& a, const Owner& b) {
  return a.instrument == b.instrument && a.range == b.range;
}

/// Full scales farther apart than this have no common level at which both read well: common practice, no
/// source.
constexpr double kMostRangeRatio = 5;

/// Whether two ranges, named "600 V", can be tied on one quantity; ranges that do not begin with a number are
/// taken to be comparable.
bool are_comparable(const std::string& a, const std::string& b) {
  const auto full_scale = [](const std::string& name) {
    return base::parse_number(std::string_view{name}.substr(0, name.find(' ')));
  };
  const auto one = full_scale(a);
  const auto other = full_scale(b);
  if (!one || !other || !(*one > 0) || !(*other > 0)) return true;
  return std::max(*one, *other) <= kMostRangeRatio * std::min(*one, *other);
}

/// The meter whose gain acts against this one's, of the same function, so that a tie makes both drop out: the
/// one with the largest such contribution.
const Source* tie_partner(const Estimate& a, const Line& line) {
  const Source* found = nullptr;
  double largest = 0;
  for (const Term& term : a.terms()) {
    const Source& other = *term.source;
    if (meter_part_of(other) != "gain" || scope_of(other) != Scope::fixed) continue;
    if (other.owner.function != line.line.owner.function || is_one_meter(other.owner, line.line.owner))
      continue;
    if (!are_comparable(other.owner.range, line.line.owner.range)) continue;
    if (term.contribution * line.line.contribution >= 0 || std::abs(term.contribution) <= largest) continue;
    largest = std::abs(term.contribution);
    found = &other;
  }
  return found;
}

/// U with every contribution multiplied by the square root of left(source).
template <class Left>
double expanded_with(const Estimate& a, Left left) {
  std::vector<Term> terms;
  for (Term term : a.terms()) {
    term.contribution *= std::sqrt(left(*term.source));
    terms.push_back(std::move(term));
  }
  return coverage(Estimate{a.value(), std::move(terms)}).expanded;
}

double expanded_after_tie(const Estimate& a, const Owner& one, const Owner& other) {
  return expanded_with(a, [&](const Source& source) -> double {
    if (source.owner.function != one.function) return 1;
    if (!is_one_meter(source.owner, one) && !is_one_meter(source.owner, other)) return 1;
    const std::string_view part = meter_part_of(source);
    if (part == "gain") return 0;
    return part == "linearity" ? 2 : 1;
  });
}

/// More readings, more degrees of freedom: nu + 1 grows as the variance shrinks.
double expanded_after_longer_window(const Estimate& a, const std::string& name) {
  std::vector<Term> terms;
  for (Term term : a.terms()) {
    if (term.source->name == name) {
      Source longer = *term.source;
      term.contribution *= std::sqrt(longer.variance_left);
      if (longer.variance_left > 0 && std::isfinite(longer.degrees_of_freedom)) {
        longer.degrees_of_freedom = (longer.degrees_of_freedom + 1) / longer.variance_left - 1;
      }
      term.source = make_source(std::move(longer));
    }
    terms.push_back(std::move(term));
  }
  return coverage(Estimate{a.value(), std::move(terms)}).expanded;
}

/// Words the action and recomputes U as if it had been taken.
void set_action(const Estimate& a, Line& one) {
  BudgetLine& line = one.line;
  const auto of_line = [&line](const Source& source) { return source.name == line.name; };
  line.action = action_text(one.remedy);
  if (one.remedy == Remedy::none) return;
  if (one.remedy == Remedy::longer_window) {
    line.expanded_if_done = expanded_after_longer_window(a, line.name);
    return;
  }
  if (one.remedy == Remedy::tie_check && meter_part_of(*one.source) == "offset") {
    line.action = "zero check: inputs shorted, before and after the run";
    line.expanded_if_done =
        expanded_with(a, [&](const Source& source) { return of_line(source) ? 0.0 : 1.0; });
    return;
  }
  const Source* partner =
      one.remedy == Remedy::tie_check && meter_part_of(*one.source) == "gain" ? tie_partner(a, one) : nullptr;
  if (partner != nullptr) {
    line.action = "tie check in this run: " + line.owner.instrument + " and " + partner->owner.instrument +
                  " on one quantity, their ratio measured";
    line.expanded_if_done = expanded_after_tie(a, line.owner, partner->owner);
    return;
  }
  line.expanded_if_done =
      expanded_with(a, [&](const Source& source) { return of_line(source) ? source.variance_left : 1.0; });
}

}  // namespace

Budget budget(const Estimate& a) {
  Budget out;
  out.coverage = coverage(a);
  const double total = a.variance();
  std::vector<Line> lines;
  for (const Term& term : a.terms()) {
    const Source& source = *term.source;
    const double variance = term.contribution * term.contribution;
    auto found =
        std::find_if(lines.begin(), lines.end(), [&](const Line& l) { return l.line.name == source.name; });
    if (found == lines.end()) {
      lines.emplace_back();
      found = lines.end() - 1;
      found->line.name = source.name;
      found->line.kind = source.kind;
      found->line.owner = source.owner;
    }
    found->line.standard_uncertainty += variance;
    if (variance > found->largest) {
      found->largest = variance;
      found->line.contribution = term.contribution;
      found->source = &source;
    }
    if (found->remedy == Remedy::none) found->remedy = source.remedy;
  }
  for (Line& one : lines) {
    BudgetLine& line = one.line;
    line.share = total > 0 ? line.standard_uncertainty / total : 0;
    line.standard_uncertainty = std::sqrt(line.standard_uncertainty);
    set_action(a, one);
    // A tie may bring in more linearity than the gains it takes away; and with little else left beside a few
    // readings, k may grow more than u shrinks.
    if (line.expanded_if_done && *line.expanded_if_done > out.coverage.expanded) {
      line.action.clear();
      line.expanded_if_done.reset();
    }
    out.lines.push_back(std::move(line));
  }
  std::sort(out.lines.begin(), out.lines.end(), [](const BudgetLine& x, const BudgetLine& y) {
    if (x.share != y.share) return x.share > y.share;
    return x.name < y.name;
  });
  return out;
}

}  // namespace loadstair::estimate
