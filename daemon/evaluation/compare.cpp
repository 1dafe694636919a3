#include "daemon/evaluation/compare.h"

#include <algorithm>
#include <utility>

#include "analysis/base/number.h"
#include "daemon/evaluation/quantity.h"

namespace loadstair::evaluation {
namespace {

std::string board(const RunResult& run) {
  return run.prototype + (run.revision.empty() ? "" : " revision " + run.revision);
}

efficiency::ComparedRun compared(const RunResult& run) {
  efficiency::ComparedRun out;
  out.run = base::print_integer(run.run);
  out.unit = run.unit;
  out.points = run.points;
  out.around = run.around;
  out.pieces = run.pieces;
  for (const efficiency::Weighted& one : run.weighted_sources)
    out.weighted.push_back({one.title, one.efficiency});
  return out;
}

/// What of two meters of one name is not the same; empty: nothing that is known of.
std::string changed(const MeterIdentity& a, const MeterIdentity& b) {
  const auto was = [](const std::string& text) { return text.empty() ? std::string{"not declared"} : text; };
  if (a.profile != b.profile) return "profile " + was(b.profile) + " against " + was(a.profile);
  if (a.serial_number != b.serial_number)
    return "serial number " + was(b.serial_number) + " against " + was(a.serial_number);
  if (a.calibrated != b.calibrated)
    return "calibrated " + was(b.calibrated) + " against " + was(a.calibrated);
  return {};
}

std::vector<std::string> not_common(const RunResult& reference, const RunResult& other,
                                    std::vector<std::string>& remarks) {
  std::vector<std::string> out;
  for (const MeterIdentity& a : reference.meters) {
    for (const MeterIdentity& b : other.meters) {
      if (a.name != b.name) continue;
      const std::string what = changed(a, b);
      if (what.empty()) continue;
      out.push_back(a.name);
      remarks.push_back(a.name + ": not the same meter, or not in the same state (" + what +
                        "); its errors count as unshared");
    }
  }
  return out;
}

DifferenceResult to_result(const efficiency::Difference& difference) {
  DifferenceResult out;
  out.label = difference.label;
  out.load_w = difference.load_w;
  out.difference = to_quantity(difference.efficiency, "1");
  out.loss_difference = to_quantity(difference.loss, "W");
  out.decision = efficiency::name_of(difference.decided);
  out.unshared_share = difference.unshared;
  out.flips_at = difference.flips_at;
  out.narrowing = difference.narrowing;
  out.text = difference.text;
  return out;
}

}  // namespace

base::Outcome<ComparisonResult> compare(const RunResult& reference, const RunResult& other) {
  if (reference.run == other.run)
    return base::Refusal{"comparison", "run " + base::print_integer(other.run) + " is compared with itself"};
  ComparisonResult out;
  out.reference = reference.run;
  out.run = other.run;
  out.reference_unit = reference.unit;
  out.unit = other.unit;
  efficiency::ComparisonInput input;
  input.reference = compared(reference);
  input.other = compared(other);
  input.rated_w = reference.rated_power_w;
  input.not_common = not_common(reference, other, out.remarks);
  const auto found = efficiency::compare(input);
  if (!found) return found.refusal();
  for (const auto& level : found->levels) out.levels.push_back(to_result(level));
  for (const auto& figure : found->weighted) out.weighted.push_back(to_result(figure));
  if (reference.prototype != other.prototype)
    out.remarks.push_back("these are different prototypes: " + board(other) + " against " + board(reference));
  if (reference.rated_power_w != other.rated_power_w) {
    out.remarks.push_back("the rated powers differ: " + base::print_number(other.rated_power_w) +
                          " W against " + base::print_number(reference.rated_power_w) +
                          " W; the reference's is used");
  }
  out.remarks.insert(out.remarks.end(), found->remarks.begin(), found->remarks.end());
  return out;
}

}  // namespace loadstair::evaluation
