// estimate: a value and where its error comes from. Sources of error, arithmetic that keeps them apart,
// standard uncertainty, coverage intervals, budgets, meter specifications turned into sources. Not for units,
// files, series of readings (series) or what a power port is (efficiency).
#pragma once

#include <initializer_list>
#include <span>
#include <vector>

#include "analysis/base/outcome.h"
#include "analysis/estimate/source.h"

namespace loadstair::estimate {

/// One contribution: sensitivity times standard uncertainty of the source, signed, in the unit of the value.
struct Term {
  SourcePtr source;
  double contribution = 0;
};

/// A value with its contributions by source. Two estimates that share a source are correlated through it;
/// nobody keeps a covariance matrix. A plain value type; copying copies a small vector. Source: JCGM
/// 100:2008 5.1-5.2, F.1.2.3.
class Estimate {
 public:
  Estimate() = default;
  /// An exact number: no contribution.
  explicit Estimate(double value) : value_{value} {}
  /// One source. standard_uncertainty may be negative where the source acts against its own sign.
  Estimate(double value, SourcePtr source, double standard_uncertainty);
  /// Several sources, in any order; terms of one source are added.
  Estimate(double value, std::vector<Term> terms);

  [[nodiscard]] double value() const { return value_; }
  /// Sorted by source; no source twice.
  [[nodiscard]] std::span<const Term> terms() const { return terms_; }
  [[nodiscard]] double variance() const;
  [[nodiscard]] double standard_uncertainty() const;

  /// The same contributions around another value: a correction that is exactly known.
  [[nodiscard]] Estimate with_value(double value) const;
  /// Only the contributions for which keep(source) holds.
  template <class Keep>
  [[nodiscard]] Estimate filtered(Keep keep) const {
    Estimate out{value_};
    for (const Term& term : terms_) {
      if (keep(*term.source)) out.terms_.push_back(term);
    }
    return out;
  }

 private:
  friend Estimate linear(double value, const Estimate& a, double by_a, const Estimate& b, double by_b);
  double value_ = 0;
  std::vector<Term> terms_;
};

/// An estimate, or why there is none.
using Quoted = base::Outcome<Estimate>;

/// An input of a function and the function's partial derivative with respect to it.
struct Partial {
  const Estimate& input;
  double derivative = 0;
};

/// Any function of estimates by the chain rule: its value, and its partial derivatives at the inputs' values.
/// Source: JCGM 100:2008 5.1.2, 5.2.2.
[[nodiscard]] Estimate combine(double value, std::span<const Partial> partials);
[[nodiscard]] Estimate combine(double value, std::initializer_list<Partial> partials);

/// The two-input case of combine(): one merge, no sorting.
[[nodiscard]] Estimate linear(double value, const Estimate& a, double by_a, const Estimate& b, double by_b);

[[nodiscard]] Estimate operator-(const Estimate& a);
[[nodiscard]] Estimate operator+(const Estimate& a, const Estimate& b);
[[nodiscard]] Estimate operator-(const Estimate& a, const Estimate& b);
[[nodiscard]] Estimate operator*(const Estimate& a, const Estimate& b);
/// The divisor must not be zero (a promise of the caller; see ratio() for foreign numbers).
[[nodiscard]] Estimate operator/(const Estimate& a, const Estimate& b);
[[nodiscard]] Estimate operator+(const Estimate& a, double b);
[[nodiscard]] Estimate operator-(const Estimate& a, double b);
[[nodiscard]] Estimate operator*(const Estimate& a, double b);
[[nodiscard]] Estimate operator/(const Estimate& a, double b);
[[nodiscard]] Estimate operator+(double a, const Estimate& b);
[[nodiscard]] Estimate operator-(double a, const Estimate& b);
[[nodiscard]] Estimate operator*(double a, const Estimate& b);
[[nodiscard]] Estimate operator/(double a, const Estimate& b);

/// Square; and square root of a value above zero (a promise of the caller).
[[nodiscard]] Estimate square(const Estimate& a);
[[nodiscard]] Estimate square_root(const Estimate& a);

/// a / b where b comes from a bench: refused when b is zero or not finite, or the result is not finite.
/// what  names the result in the refusal ("efficiency").
[[nodiscard]] Quoted ratio(const Estimate& a, const Estimate& b, std::string_view what);

/// Covariance of two estimates: the sum of the products of their contributions, by source.
/// Source: JCGM 100:2008 F.1.2.3.
[[nodiscard]] double covariance(const Estimate& a, const Estimate& b);
/// Covariance over both standard uncertainties, within [-1, 1]; 0 where one of them is exact.
[[nodiscard]] double correlation(const Estimate& a, const Estimate& b);

/// A value known to lie within low..high and no more: rectangular (JCGM 100:2008 4.3.7). Two typed readings
/// of a steady quantity, a power factor declared as [low, 1], a shunt within its tolerance. Order of the ends
/// does not matter.
[[nodiscard]] Estimate bounded(double low, double high, SourcePtr source);

}  // namespace loadstair::estimate
