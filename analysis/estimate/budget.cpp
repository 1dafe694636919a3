#include "analysis/estimate/budget.h"

#include <algorithm>
#include <cmath>

namespace loadstair::estimate {

namespace {

std::string_view action_text(Remedy remedy) {
  switch (remedy) {
    case Remedy::none:
      return "";
    case Remedy::another_range:
      return "use a range nearer to the reading";
    case Remedy::tie_check:
      return "tie check: meters in parallel or in series, their ratio measured";
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
  Remedy remedy = Remedy::none;
};

/// U of the estimate with every source of that name cut down to what its remedy leaves.
double expanded_after(const Estimate& a, const std::string& name) {
  std::vector<Term> terms;
  for (Term term : a.terms()) {
    if (term.source->name == name) term.contribution *= std::sqrt(term.source->variance_left);
    terms.push_back(std::move(term));
  }
  return coverage(Estimate{a.value(), std::move(terms)}).expanded;
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
    }
    if (found->remedy == Remedy::none) found->remedy = source.remedy;
  }
  for (Line& one : lines) {
    BudgetLine& line = one.line;
    line.share = total > 0 ? line.standard_uncertainty / total : 0;
    line.standard_uncertainty = std::sqrt(line.standard_uncertainty);
    line.action = action_text(one.remedy);
    if (one.remedy != Remedy::none) line.expanded_if_done = expanded_after(a, line.name);
    out.lines.push_back(std::move(line));
  }
  std::sort(out.lines.begin(), out.lines.end(), [](const BudgetLine& x, const BudgetLine& y) {
    if (x.share != y.share) return x.share > y.share;
    return x.name < y.name;
  });
  return out;
}

}  // namespace loadstair::estimate
