#include "analysis/series/statistics.h"

#include <algorithm>
#include <cmath>

#include "analysis/base/number.h"

namespace loadstair::series {

void CompensatedSum::add(double term) {
  const double sum = sum_ + term;
  // The smaller of the two loses digits; which one it is decides how they are recovered.
  if (std::abs(sum_) >= std::abs(term)) {
    correction_ += (sum_ - sum) + term;
  } else {
    correction_ += (term - sum) + sum_;
  }
  sum_ = sum;
}

double CompensatedSum::remainder() const {
  const double rounded = sum_ + correction_;
  const double part = rounded - sum_;
  return (sum_ - (rounded - part)) + (correction_ - part);
}

base::Outcome<Statistics> statistics(std::span<const double> value) {
  if (value.empty()) return base::Refusal{"", "no values"};
  Statistics out;
  out.count = value.size();
  out.least = out.greatest = value.front();
  CompensatedSum sum;
  for (std::size_t i = 0; i < value.size(); ++i) {
    if (!std::isfinite(value[i])) {
      return base::Refusal{"value " + base::print_integer(static_cast<std::int64_t>(i) + 1),
                           "not a finite number"};
    }
    out.least = std::min(out.least, value[i]);
    out.greatest = std::max(out.greatest, value[i]);
    sum.add(value[i]);
  }
  const double count = static_cast<double>(value.size());
  // The mean as high + low: fma gives the exact remainder of the division.
  const double high = sum.total() / count;
  const double low = (std::fma(-high, count, sum.total()) + sum.remainder()) / count;
  out.mean = high + low;

  CompensatedSum squares;
  CompensatedSum products;
  CompensatedSum deviations;
  double previous = 0;
  for (std::size_t i = 0; i < value.size(); ++i) {
    const double deviation = (value[i] - high) - low;
    squares.add(deviation * deviation);
    deviations.add(deviation);
    if (i > 0) products.add(deviation * previous);
    previous = deviation;
  }
  const double total = squares.total() - deviations.total() * deviations.total() / count;
  if (value.size() > 1 && total > 0) {
    out.standard_deviation = std::sqrt(total / (count - 1));
    out.lag1_autocorrelation = products.total() / total;
  }
  return out;
}

double correlation_of_residuals(std::span<const double> a, std::span<const double> b) {
  CompensatedSum aa;
  CompensatedSum bb;
  CompensatedSum ab;
  for (std::size_t i = 0; i < std::min(a.size(), b.size()); ++i) {
    aa.add(a[i] * a[i]);
    bb.add(b[i] * b[i]);
    ab.add(a[i] * b[i]);
  }
  const double scale = std::sqrt(aa.total()) * std::sqrt(bb.total());
  if (!(scale > 0)) return 0;
  return std::clamp(ab.total() / scale, -1.0, 1.0);
}

}  // namespace loadstair::series
