#include "analysis/estimate/estimate.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <string>
#include <utility>

#include "analysis/base/require.h"

namespace loadstair::estimate {

namespace {

bool same(const Source& a, const Source& b) {
  return &a == &b || (a.order == b.order && a.key == b.key);
}

void sort_and_merge(std::vector<Term>& terms) {
  // Stable, so that equal sources are added in the order in which they came: the same bits every time.
  std::stable_sort(terms.begin(), terms.end(),
                   [](const Term& a, const Term& b) { return before(*a.source, *b.source); });
  std::size_t kept = 0;
  for (std::size_t i = 0; i < terms.size(); ++i) {
    if (kept > 0 && same(*terms[kept - 1].source, *terms[i].source)) {
      terms[kept - 1].contribution += terms[i].contribution;
    } else {
      if (kept != i) terms[kept] = std::move(terms[i]);
      ++kept;
    }
  }
  terms.resize(kept);
}

}  // namespace

Estimate::Estimate(double value, SourcePtr source, double standard_uncertainty) : value_{value} {
  base::require(source != nullptr, "a contribution has a source");
  if (standard_uncertainty != 0) terms_.push_back({std::move(source), standard_uncertainty});
}

Estimate::Estimate(double value, std::vector<Term> terms) : value_{value}, terms_{std::move(terms)} {
  std::erase_if(terms_, [](const Term& term) { return term.contribution == 0; });
  sort_and_merge(terms_);
}

double Estimate::variance() const {
  double sum = 0;
  for (const Term& term : terms_) sum += term.contribution * term.contribution;
  return sum;
}

double Estimate::standard_uncertainty() const {
  return std::sqrt(variance());
}

Estimate Estimate::with_value(double value) const {
  Estimate out = *this;
  out.value_ = value;
  return out;
}

Estimate combine(double value, std::span<const Partial> partials) {
  std::vector<Term> terms;
  std::size_t total = 0;
  for (const Partial& partial : partials) total += partial.input.terms().size();
  terms.reserve(total);
  for (const Partial& partial : partials) {
    if (partial.derivative == 0) continue;
    for (const Term& term : partial.input.terms()) {
      terms.push_back({term.source, partial.derivative * term.contribution});
    }
  }
  return Estimate{value, std::move(terms)};
}

Estimate combine(double value, std::initializer_list<Partial> partials) {
  return combine(value, std::span{partials.begin(), partials.size()});
}

Estimate linear(double value, const Estimate& a, double by_a, const Estimate& b, double by_b) {
  Estimate out{value};
  out.terms_.reserve(a.terms_.size() + b.terms_.size());
  const auto put = [&out](const SourcePtr& source, double contribution) {
    if (contribution != 0) out.terms_.push_back({source, contribution});
  };
  auto i = a.terms_.begin();
  auto j = b.terms_.begin();
  while (i != a.terms_.end() && j != b.terms_.end()) {
    if (same(*i->source, *j->source)) {
      put(i->source, by_a * i->contribution + by_b * j->contribution);
      ++i, ++j;
    } else if (before(*i->source, *j->source)) {
      put(i->source, by_a * i->contribution);
      ++i;
    } else {
      put(j->source, by_b * j->contribution);
      ++j;
    }
  }
  for (; i != a.terms_.end(); ++i) put(i->source, by_a * i->contribution);
  for (; j != b.terms_.end(); ++j) put(j->source, by_b * j->contribution);
  return out;
}

Estimate operator-(const Estimate& a) {
  return linear(-a.value(), a, -1, Estimate{}, 0);
}
Estimate operator+(const Estimate& a, const Estimate& b) {
  return linear(a.value() + b.value(), a, 1, b, 1);
}
Estimate operator-(const Estimate& a, const Estimate& b) {
  return linear(a.value() - b.value(), a, 1, b, -1);
}
Estimate operator*(const Estimate& a, const Estimate& b) {
  return linear(a.value() * b.value(), a, b.value(), b, a.value());
}
Estimate operator/(const Estimate& a, const Estimate& b) {
  base::require(b.value() != 0, "an estimate is not divided by zero");
  const double quotient = a.value() / b.value();
  return linear(quotient, a, 1 / b.value(), b, -quotient / b.value());
}
Estimate operator+(const Estimate& a, double b) {
  return a.with_value(a.value() + b);
}
Estimate operator-(const Estimate& a, double b) {
  return a.with_value(a.value() - b);
}
Estimate operator*(const Estimate& a, double b) {
  return linear(a.value() * b, a, b, Estimate{}, 0);
}
Estimate operator/(const Estimate& a, double b) {
  base::require(b != 0, "an estimate is not divided by zero");
  return linear(a.value() / b, a, 1 / b, Estimate{}, 0);
}
Estimate operator+(double a, const Estimate& b) {
  return b + a;
}
Estimate operator-(double a, const Estimate& b) {
  return linear(a - b.value(), b, -1, Estimate{}, 0);
}
Estimate operator*(double a, const Estimate& b) {
  return b * a;
}
Estimate operator/(double a, const Estimate& b) {
  return Estimate{a} / b;
}

Estimate square(const Estimate& a) {
  return linear(a.value() * a.value(), a, 2 * a.value(), Estimate{}, 0);
}

Estimate square_root(const Estimate& a) {
  base::require(a.value() > 0, "the square root of an estimate is taken above zero");
  const double root = std::sqrt(a.value());
  return linear(root, a, 0.5 / root, Estimate{}, 0);
}

Quoted ratio(const Estimate& a, const Estimate& b, std::string_view what) {
  if (b.value() == 0 || !std::isfinite(b.value())) {
    return base::Refusal{std::string{what},
                         b.value() == 0 ? "its divisor is zero" : "its divisor is not finite"};
  }
  Estimate out = a / b;
  if (!std::isfinite(out.value()) || !std::isfinite(out.variance())) {
    return base::Refusal{std::string{what}, "the quotient is beyond the range of numbers"};
  }
  return out;
}

double covariance(const Estimate& a, const Estimate& b) {
  double sum = 0;
  auto i = a.terms().begin();
  auto j = b.terms().begin();
  while (i != a.terms().end() && j != b.terms().end()) {
    if (same(*i->source, *j->source)) {
      sum += i->contribution * j->contribution;
      ++i, ++j;
    } else if (before(*i->source, *j->source)) {
      ++i;
    } else {
      ++j;
    }
  }
  return sum;
}

double correlation(const Estimate& a, const Estimate& b) {
  const double scale = a.standard_uncertainty() * b.standard_uncertainty();
  if (!(scale > 0)) return 0;
  return std::clamp(covariance(a, b) / scale, -1.0, 1.0);
}

Estimate bounded(double low, double high, SourcePtr source) {
  return Estimate{low + (high - low) / 2, std::move(source),
                  std::abs(high - low) / (2 * std::numbers::sqrt3)};
}

}  // namespace loadstair::estimate
