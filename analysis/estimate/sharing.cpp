#include "analysis/estimate/sharing.h"

#include <gsl/gsl_cdf.h>

#include <algorithm>
#include <cmath>
#include <string>
#include <vector>

namespace loadstair::estimate {

namespace {

/// The parts of a key, still escaped; at most nine.
std::vector<std::string_view> parts_of(std::string_view key) {
  std::vector<std::string_view> out;
  std::size_t from = 0;
  for (std::size_t i = 0; i < key.size(); ++i) {
    if (key[i] == '\\') {
      ++i;
    } else if (key[i] == '/') {
      out.push_back(key.substr(from, i - from));
      from = i + 1;
    }
  }
  out.push_back(key.substr(from));
  return out;
}

/// Variance of gain and offset that a specification gives at a reading.
Quoted whole_error(double reading, MeterRange meter, const AccuracySpec& accuracy) {
  meter.accuracy = accuracy;
  // The resolution is nobody's share.
  if (!(accuracy.digits > 0)) meter.digit = 0;
  return with_meter_error(reading, meter, {});
}

}  // namespace

Scope scope_of(const Source& source) {
  const auto parts = parts_of(source.key);
  if (parts[0] == "component") return Scope::fixed;
  if (parts[0] != "meter" || parts.size() < 5) return Scope::other;
  if (parts.size() == 5) return Scope::fixed;
  if (parts.size() == 7 && parts[5] == "run") return Scope::per_run;
  if (parts.size() == 9 && parts[5] == "run" && parts[7] == "level") return Scope::per_level;
  return Scope::other;
}

std::string_view meter_part_of(const Source& source) {
  const auto parts = parts_of(source.key);
  return parts[0] == "meter" && parts.size() >= 5 ? parts[4] : std::string_view{};
}

ScopeShares scope_shares(const Estimate& a) {
  ScopeShares out;
  const double total = a.variance();
  if (!(total > 0)) return out;
  for (const Term& term : a.terms()) {
    const double share = term.contribution * term.contribution / total;
    switch (scope_of(*term.source)) {
      case Scope::fixed:
        out.fixed += share;
        break;
      case Scope::per_run:
        out.per_run += share;
        break;
      case Scope::per_level:
        out.per_level += share;
        break;
      case Scope::other:
        out.other += share;
        break;
    }
  }
  return out;
}

base::Outcome<Shares> shares_from_repeatability(double reading, const MeterRange& meter,
                                                const AccuracySpec& short_term) {
  const std::string place = meter.meter.instrument + " repeatability";
  if (!meter.accuracy) return base::Refusal{place, "no accuracy is declared for this range"};
  const Quoted full = whole_error(reading, meter, *meter.accuracy);
  if (!full) return full.refusal();
  const Quoted brief = whole_error(reading, meter, short_term);
  if (!brief) return base::Refusal{place, brief.refusal().reason};
  if (!(full->variance() > 0)) return base::Refusal{place, "the declared accuracy is zero at this reading"};
  const double unshared = std::min(1.0, brief->variance() / full->variance());
  return Shares{1 - unshared, unshared / 2, unshared / 2};
}

base::Outcome<Shares> shares_from_ties(std::span<const double> relative_differences, double relative_u_a,
                                       double relative_u_b, const Shares& otherwise) {
  const base::Refusal few{"tie checks", "a spread between runs takes at least three of them"};
  if (relative_differences.size() < 3) return few;
  const double specified = relative_u_a * relative_u_a + relative_u_b * relative_u_b;
  if (!(specified > 0) || !std::isfinite(specified)) {
    return base::Refusal{"tie checks", "neither meter's specification gives a gain error to share"};
  }
  const auto count = static_cast<double>(relative_differences.size());
  double mean = 0;
  for (const double x : relative_differences) mean += x / count;
  double squares = 0;
  for (const double x : relative_differences) squares += (x - mean) * (x - mean);
  if (!std::isfinite(squares)) return base::Refusal{"tie checks", "a ratio is not a finite number"};
  // 0.1587: one standard deviation of the normal distribution, one-sided.
  const double least_chi_squared = gsl_cdf_chisq_Pinv(0.15865525393145707, count - 1);
  Shares out = otherwise;
  out.per_run = std::min(1 - otherwise.per_level, squares / least_chi_squared / specified);
  out.fixed = 1 - out.per_level - out.per_run;
  return out;
}

Shares without_fixed(const Shares& shares) {
  return {0, shares.fixed + shares.per_run, shares.per_level};
}

}  // namespace loadstair::estimate
