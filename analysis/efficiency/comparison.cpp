#include "analysis/efficiency/comparison.h"

#include <gsl/gsl_cdf.h>

#include <algorithm>
#include <cmath>
#include <numeric>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/efficiency/common_load.h"
#include "analysis/estimate/coverage.h"

namespace loadstair::efficiency {

namespace {

constexpr double kRisk = 1 - estimate::kLevel;
constexpr std::size_t kNone = static_cast<std::size_t>(-1);

std::string watts(double value) {
  return base::print_significant(value, 4) + " W";
}

std::string percent(double share) {
  return base::print_significant(100 * share, 2) + " %";
}

/// A figure with its sharing, while a family of them is judged.
struct Judged {
  Difference* into = nullptr;
  Sharing sharing;
  double value = 0;
  double degrees_of_freedom = 0;

  /// Two-sided p of no difference, were the unshared share another one. Type A stays as it is, so that the
  /// effective degrees of freedom go with the square of the variance.
  [[nodiscard]] double p_at(double unshared) const { return p_of(sharing.variance_at(unshared)); }
  [[nodiscard]] double p() const { return p_of(sharing.variance()); }

 private:
  [[nodiscard]] double p_of(double variance) const {
    if (!(variance > 0)) return value == 0 ? 1 : 0;
    const double t = std::abs(value) / std::sqrt(variance);
    const double ratio = variance / sharing.variance();
    const double nu = degrees_of_freedom * ratio * ratio;
    return 2 * (std::isfinite(nu) ? gsl_cdf_tdist_Q(t, nu) : gsl_cdf_ugaussian_Q(t));
  }
};

/// Share at which the decision about one of a family changes, the others as they are.
std::optional<double> flip_of(const std::vector<Judged>& family, std::vector<double> p, std::size_t which) {
  const auto resolved_at = [&](double share) {
    p[which] = family[which].p_at(share);
    return holm_adjusted(p)[which] <= kRisk;
  };
  const double assumed = family[which].sharing.unshared();
  const bool resolved = resolved_at(assumed);
  double same = assumed;
  double other = resolved ? 1 : 0;
  if (!family[which].sharing.of_meters() || resolved_at(other) == resolved) return std::nullopt;
  while (std::abs(other - same) > 1e-9) {
    const double middle = (same + other) / 2;
    (resolved_at(middle) == resolved ? same : other) = middle;
  }
  return (same + other) / 2;
}

/// Value and U to two digits of U (JCGM 100:2008 7.2.6), with a unit.
std::string with_interval(const Estimate& of, double scale, const std::string& unit, bool magnitude) {
  const auto interval = estimate::coverage(of);
  const double expanded = interval.expanded * scale;
  const double value = (magnitude ? std::abs(interval.value) : interval.value) * scale;
  const int decimals =
      expanded > 0 ? std::clamp(1 - static_cast<int>(std::floor(std::log10(expanded))), 0, 9) : 4;
  return base::print_fixed(value, decimals) + " \u00b1" + base::print_fixed(expanded, decimals) + " " + unit;
}

std::string share_text(const Difference& of, const Sharing& sharing) {
  if (!sharing.of_meters()) return {};
  const std::string assumed = " (assumed " + base::print_fixed(of.unshared, 2) + ")";
  if (of.decided == Decided::not_resolved) {
    if (!of.flips_at) return "; no unshared share of the meters' variance would resolve it" + assumed;
    return "; it would be resolved below an unshared share of " + base::print_fixed(*of.flips_at, 2) +
           assumed;
  }
  if (!of.flips_at) return "; no unshared share of the meters' variance would flip it" + assumed;
  return "; it holds up to an unshared share of " + base::print_fixed(*of.flips_at, 2) + assumed;
}

std::string decision_text(const Difference& of, const Sharing& sharing, std::size_t family) {
  const Estimate& efficiency = *of.efficiency;
  if (of.decided != Decided::not_resolved) {
    return name_of(of.decided) + " by " + with_interval(efficiency, 100, "points", true) +
           share_text(of, sharing);
  }
  std::string out = "not resolved, " + with_interval(efficiency, 100, "points", false);
  const auto interval = estimate::coverage(efficiency);
  if (std::abs(interval.value) > interval.expanded) {
    out += " (alone it would be, among " + base::print_integer(static_cast<std::int64_t>(family)) +
           " judged together it is not)";
  }
  return out + share_text(of, sharing);
}

/// Holm's method over a family; texts follow the place ("unit B against A at 50 %: ").
void judge(std::vector<Judged>& family, const std::vector<std::string>& places) {
  std::vector<double> p;
  for (const Judged& one : family) p.push_back(one.p());
  const std::vector<double> adjusted = holm_adjusted(p);
  for (std::size_t i = 0; i < family.size(); ++i) {
    Difference& out = *family[i].into;
    const Sharing& sharing = family[i].sharing;
    out.adjusted_p = adjusted[i];
    out.decided = Decided::not_resolved;
    if (adjusted[i] <= kRisk) out.decided = family[i].value > 0 ? Decided::better : Decided::worse;
    out.unshared = sharing.unshared();
    out.flips_at = flip_of(family, p, i);
    // Noise that no sharing reaches keeps its degrees of freedom.
    const double assumed = sharing.variance();
    const double alone = sharing.variance_without_sharing();
    if (assumed > 0) {
      const double ratio = alone / assumed;
      const double nu = family[i].degrees_of_freedom;
      out.narrowing = std::sqrt(ratio) * estimate::student_t(estimate::kLevel, nu * ratio * ratio) /
                      estimate::student_t(estimate::kLevel, nu);
    }
    out.text = places[i] + decision_text(out, sharing, family.size());
  }
}

class Comparing {
 public:
  explicit Comparing(const ComparisonInput& input) : input_{input} {}

  Comparison run() {
    Comparison out;
    const std::vector<std::size_t> partner = partners();
    for (std::size_t i = 0; i < input_.reference.points.size(); ++i)
      out.levels.push_back(level(i, partner[i]));
    for (std::size_t i = 0; i < input_.other.points.size(); ++i) {
      if (std::find(partner.begin(), partner.end(), i) == partner.end())
        out.levels.push_back(lonely(input_.other, i, input_.reference));
    }
    judge_levels(out.levels, partner);
    weighted(out);
    remarks(out);
    return out;
  }

 private:
  /// Of each of the reference's levels the other run's: of the same label, else the nearest load that is
  /// left.
  [[nodiscard]] std::vector<std::size_t> partners() const {
    const auto& ours = input_.reference.points;
    const auto& theirs = input_.other.points;
    std::vector<std::size_t> out(ours.size(), kNone);
    std::vector<bool> taken(theirs.size(), false);
    const auto pair = [&](std::size_t i, const auto& fits) {
      for (std::size_t j = 0; j < theirs.size(); ++j) {
        if (taken[j] || !fits(i, j)) continue;
        if (out[i] == kNone || apart_w(i, j) < apart_w(i, out[i])) out[i] = j;
      }
      if (out[i] != kNone) taken[out[i]] = true;
    };
    for (std::size_t i = 0; i < ours.size(); ++i)
      pair(i, [&](std::size_t a, std::size_t b) {
        return !ours[a].label.empty() && ours[a].label == theirs[b].label;
      });
    for (std::size_t i = 0; i < ours.size(); ++i) {
      if (out[i] == kNone)
        pair(i, [&](std::size_t a, std::size_t b) {
          return apart_w(a, b) <= kCommonLoadWithin * input_.rated_w;
        });
    }
    return out;
  }

  [[nodiscard]] double apart_w(std::size_t i, std::size_t j) const {
    return std::abs(input_.other.points[j].output_power.value() -
                    input_.reference.points[i].output_power.value());
  }

  [[nodiscard]] std::string names() const {
    const std::string &a = input_.reference.unit, &b = input_.other.unit;
    if (!a.empty() && !b.empty() && a != b) return "unit " + b + " against " + a;
    const std::string runs = "run " + input_.other.run + " against run " + input_.reference.run;
    return b.empty() || a.empty() ? runs : "unit " + b + ", " + runs;
  }

  [[nodiscard]] Difference refused(const std::string& label, const std::string& why) const {
    Difference out;
    out.label = label;
    out.efficiency = base::Refusal{"", why};
    out.loss = base::Refusal{"", why};
    out.text = names() + " at " + label + ": not compared, " + why;
    return out;
  }

  [[nodiscard]] Difference lonely(const ComparedRun& run, std::size_t at, const ComparedRun& missing) const {
    const CurvePoint& point = run.points[at];
    std::string why = "run " + missing.run + " has no such level";
    double nearest_w = 0;
    for (const CurvePoint& one : missing.points) {
      const double load_w = one.output_power.value();
      if (nearest_w == 0 ||
          std::abs(load_w - point.output_power.value()) < std::abs(nearest_w - point.output_power.value()))
        nearest_w = load_w;
    }
    if (nearest_w != 0)
      why += ": its nearest is at " + watts(nearest_w) + ", this one at " + watts(point.output_power.value());
    return refused(point.label, why);
  }

  [[nodiscard]] Around around(const ComparedRun& run, std::size_t at) const {
    return at < run.around.size() ? run.around[at] : Around{};
  }

  /// Why two levels cannot be held against each other; empty where they can.
  [[nodiscard]] std::string obstacle(std::size_t i, std::size_t j) const {
    const double ours_w = input_.reference.points[i].output_power.value();
    const double theirs_w = input_.other.points[j].output_power.value();
    if (!(ours_w > 0) || !(theirs_w > 0)) return "a level without output power has no efficiency";
    if (!is_finite(input_.reference.points[i]) || !is_finite(input_.other.points[j]))
      return "a figure is not finite";
    const double apart = apart_w(i, j) / input_.rated_w;
    if (!(apart <= kCommonLoadWithin)) {
      return "the loads lie " + percent(apart) + " of rated power apart (" + watts(theirs_w) + " against " +
             watts(ours_w) + "); up to 2 % is moved to a common load";
    }
    const auto ours_v = around(input_.reference, i).input_voltage_v;
    const auto theirs_v = around(input_.other, j).input_voltage_v;
    if ((ours_v && !std::isfinite(*ours_v)) || (theirs_v && !std::isfinite(*theirs_v)))
      return "an input voltage is not a finite number";
    if (ours_v && theirs_v && !(std::abs(*theirs_v - *ours_v) <= kCommonVoltageWithin * std::abs(*ours_v))) {
      return "the input voltages lie too far apart (" + base::print_significant(*theirs_v, 4) +
             " V against " + base::print_significant(*ours_v, 4) + " V); up to 2 % is allowed for";
    }
    return {};
  }

  [[nodiscard]] Difference level(std::size_t i, std::size_t j) {
    if (j == kNone) return lonely(input_.reference, i, input_.other);
    const std::string& label = input_.reference.points[i].label;
    if (const std::string why = obstacle(i, j); !why.empty()) return refused(label, why);
    const auto [a, b] = at_common_load(i, j);
    if (!is_finite(a.efficiency) || !is_finite(b.efficiency) || !is_finite(a.loss) || !is_finite(b.loss))
      return refused(label, "the levels cannot be moved to a common load");
    Difference out;
    out.label = label;
    out.load_w = common_w(i, j);
    const std::string& run = input_.other.run;
    out.efficiency = set_apart(b.efficiency, input_.not_common, run) - a.efficiency;
    out.loss = set_apart(b.loss, input_.not_common, run) - a.loss;
    return out;
  }

  [[nodiscard]] double common_w(std::size_t i, std::size_t j) const {
    return (input_.reference.points[i].output_power.value() + input_.other.points[j].output_power.value()) /
           2;
  }

  [[nodiscard]] std::pair<AtLoad, AtLoad> at_common_load(std::size_t i, std::size_t j) const {
    const double load_w = common_w(i, j);
    const ComparedRun& other = input_.other;
    return {at_load(input_.reference, i, load_w),
            with_surroundings(at_load(other, j, load_w), load_w, around(input_.reference, i),
                              around(other, j), other.run, other.points[j].label)};
  }

  [[nodiscard]] Judged judged(Difference& of, const Estimate& a, const Estimate& b) const {
    return {&of, Sharing{a, b, input_.not_common}, of.efficiency->value(),
            estimate::effective_degrees_of_freedom(*of.efficiency)};
  }

  void judge_levels(std::vector<Difference>& levels, const std::vector<std::size_t>& partner) const {
    std::vector<Judged> family;
    std::vector<std::string> places;
    for (std::size_t i = 0; i < partner.size(); ++i) {
      if (!levels[i].efficiency) continue;
      const auto [a, b] = at_common_load(i, partner[i]);
      family.push_back(judged(levels[i], a.efficiency, b.efficiency));
      places.push_back(names() + " at " + levels[i].label + ": ");
    }
    judge(family, places);
  }

  void weighted(Comparison& out) const {
    std::vector<std::pair<const Estimate*, const Estimate*>> both;
    for (const ComparedFigure& a : input_.reference.weighted) {
      for (const ComparedFigure& b : input_.other.weighted) {
        if (a.title != b.title || !a.efficiency || !b.efficiency) continue;
        if (!is_finite(*a.efficiency) || !is_finite(*b.efficiency)) continue;
        Difference one;
        one.label = a.title;
        one.efficiency = set_apart(*b.efficiency, input_.not_common, input_.other.run) - *a.efficiency;
        one.loss = base::Refusal{"", "a weighted figure has no loss"};
        out.weighted.push_back(std::move(one));
        both.emplace_back(&*a.efficiency, &*b.efficiency);
      }
    }
    std::vector<Judged> family;
    std::vector<std::string> places;
    for (std::size_t i = 0; i < both.size(); ++i) {
      family.push_back(judged(out.weighted[i], *both[i].first, *both[i].second));
      places.push_back(names() + ", " + out.weighted[i].label + ": ");
    }
    judge(family, places);
  }

  void remarks(Comparison& out) const {
    const auto compared = std::count_if(out.levels.begin(), out.levels.end(), [](const Difference& one) {
      return one.decided != Decided::refused;
    });
    if (compared == 0 && out.weighted.empty()) {
      out.remarks.emplace_back("the runs have no level in common that could be compared");
      return;
    }
    if (compared > 1) {
      out.remarks.emplace_back(
          "levels are judged together: with no difference at all, the risk of calling any of them better or "
          "worse is at most 5 % (Holm's method); each interval is its own 95 % one");
    }
    if (!input_.reconnected) {
      out.remarks.emplace_back(
          "repeatability was not tested: without a repeat after reconnecting, what connecting a board anew "
          "does is not in these intervals");
    }
    if (!input_.reference.unit.empty() && input_.reference.unit != input_.other.unit) {
      out.remarks.emplace_back(
          "one unit against one: what is resolved is true of these two, not of their revisions");
    }
    if (!known(&Around::ambient_c))
      out.remarks.emplace_back("ambient is not known of every level: a difference in it is not allowed for");
    if (!known(&Around::input_voltage_v)) {
      out.remarks.emplace_back(
          "the input voltage is not known of every level: a difference in it is not allowed for");
    }
  }

  [[nodiscard]] bool known(std::optional<double> Around::*what) const {
    const auto of = [&](const ComparedRun& run) {
      return run.around.size() >= run.points.size() &&
             std::all_of(run.around.begin(), run.around.end(),
                         [&](const Around& one) { return (one.*what).has_value(); });
    };
    return of(input_.reference) && of(input_.other);
  }

  const ComparisonInput& input_;
};

}  // namespace

std::string name_of(Decided decided) {
  switch (decided) {
    case Decided::better:
      return "better";
    case Decided::worse:
      return "worse";
    case Decided::not_resolved:
      return "not resolved";
    case Decided::refused:
      break;
  }
  return "not compared";
}

std::vector<double> holm_adjusted(std::span<const double> p) {
  std::vector<std::size_t> order(p.size());
  std::iota(order.begin(), order.end(), std::size_t{0});
  std::stable_sort(order.begin(), order.end(), [&](std::size_t a, std::size_t b) { return p[a] < p[b]; });
  std::vector<double> out(p.size());
  double least = 0;
  for (std::size_t i = 0; i < order.size(); ++i) {
    least = std::max(least, std::min(1.0, static_cast<double>(p.size() - i) * p[order[i]]));
    out[order[i]] = least;
  }
  return out;
}

base::Outcome<Comparison> compare(const ComparisonInput& input) {
  if (!(input.rated_w > 0) || !std::isfinite(input.rated_w))
    return base::Refusal{"comparison", "the rated output power is not declared or not above zero"};
  return Comparing{input}.run();
}

}  // namespace loadstair::efficiency
