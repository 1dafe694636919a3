#include "analysis/efficiency/between_runs.h"

#include <algorithm>
#include <cmath>
#include <map>
#include <utility>
#include <vector>

#include "analysis/estimate/sharing.h"

namespace loadstair::efficiency {

namespace {

using estimate::Estimate;
using estimate::Scope;
using estimate::Source;
using estimate::Term;

bool of_these(const Source& source, std::span<const std::string> owners) {
  return std::find(owners.begin(), owners.end(), source.owner.instrument) != owners.end();
}

/// Whose share is asked for: a meter's errors, but not its last digit, which is nobody's share.
bool of_meter(const Source& source) {
  return source.kind == estimate::Kind::type_b && !source.resolution &&
         !estimate::meter_part_of(source).empty();
}

std::string own_key(const Source& source, const std::string& run) {
  const auto part = estimate::meter_part_of(source);
  // Not the key of the meter's share per run: two independent errors must not become one.
  if (!part.empty())
    return estimate::key::meter_in_run(source.owner, "not shared: " + std::string{part}, run);
  return estimate::key::window(run, "", "not shared: " + source.key);
}

/// One run's errors of one part of a meter: what lasts as a signed amplitude.
struct Lasting {
  double variance = 0;
  double largest = 0;  ///< contribution, for the sign
  [[nodiscard]] double amplitude() const { return std::copysign(std::sqrt(variance), largest); }
};

/// One run's errors of one meter on one range.
struct OfMeter {
  std::map<std::string, Lasting, std::less<>> parts;
  double whole = 0;  ///< variance
  void add(const Term& term) {
    const double variance = term.contribution * term.contribution;
    whole += variance;
    if (estimate::scope_of(*term.source) == Scope::per_level) return;
    Lasting& part = parts[std::string{estimate::meter_part_of(*term.source)}];
    part.variance += variance;
    if (std::abs(term.contribution) > std::abs(part.largest)) part.largest = term.contribution;
  }
  /// A part as large as it were if the meter's whole variance lasted.
  [[nodiscard]] double if_all_lasted(std::string_view name) const {
    double lasting = 0;
    for (const auto& [key, part] : parts) lasting += part.variance;
    const auto found = parts.find(name);
    return found == parts.end() || !(lasting > 0) ? 0
                                                  : found->second.amplitude() * std::sqrt(whole / lasting);
  }
};

using Meters = std::map<std::string, std::pair<OfMeter, OfMeter>>;

double variance_if_all_shared(const Meters& meters) {
  double out = 0;
  for (const auto& [name, both] : meters) {
    std::map<std::string, double> difference;
    for (const auto& [part, ignored] : both.first.parts) difference[part] -= both.first.if_all_lasted(part);
    for (const auto& [part, ignored] : both.second.parts) difference[part] += both.second.if_all_lasted(part);
    for (const auto& [part, value] : difference) out += value * value;
  }
  return out;
}

Meters meters_of(const Estimate& a, const Estimate& b) {
  const auto name_of = [](const Source& source) { return estimate::key::meter(source.owner, ""); };
  Meters out;
  for (const Term& term : a.terms()) {
    if (of_meter(*term.source)) out[name_of(*term.source)].first.add(term);
  }
  for (const Term& term : b.terms()) {
    if (of_meter(*term.source)) out[name_of(*term.source)].second.add(term);
  }
  return out;
}

}  // namespace

Estimate set_apart(const Estimate& of, std::span<const std::string> owners, const std::string& run) {
  std::vector<Term> terms;
  for (const Term& term : of.terms()) {
    if (estimate::scope_of(*term.source) != Scope::fixed || !of_these(*term.source, owners)) {
      terms.push_back(term);
      continue;
    }
    Source own = *term.source;
    own.key = own_key(own, run);
    terms.push_back({estimate::make_source(std::move(own)), term.contribution});
  }
  return {of.value(), std::move(terms)};
}

Sharing::Sharing(const Estimate& a, const Estimate& b, std::span<const std::string> owners) {
  const auto meter = [](const Source& source) { return of_meter(source); };
  const Estimate meter_a = a.filtered(meter);
  const Estimate meter_b = b.filtered(meter);
  // Set apart by a run's name that no key has: only whether the two still meet counts here.
  const Estimate apart = set_apart(b, owners, "");
  const Estimate meter_apart = apart.filtered(meter);
  all_ = variance_if_all_shared(meters_of(meter_a, meter_b));
  none_ = meter_a.variance() + meter_b.variance();
  assumed_ = (meter_apart - meter_a).variance();
  rest_ = std::max(0.0, (apart - a).variance() - assumed_);
  without_sharing_ = a.variance() + b.variance();
  double shared = 0;
  for (const Term& term : meter_a.terms()) {
    const double other = estimate::covariance(meter_apart, Estimate{0, term.source, 1});
    if (other != 0) shared += term.contribution * term.contribution + other * other;
  }
  unshared_ = none_ > 0 ? std::clamp(1 - shared / none_, 0.0, 1.0) : 0;
}

double Sharing::variance_at(double unshared) const {
  if (unshared <= unshared_) {
    const double part = unshared_ > 0 ? unshared / unshared_ : 1;
    return rest_ + all_ + part * (assumed_ - all_);
  }
  const double part = (unshared - unshared_) / (1 - unshared_);
  return rest_ + assumed_ + part * (none_ - assumed_);
}

}  // namespace loadstair::efficiency
