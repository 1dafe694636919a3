#include "analysis/estimate/generator.h"

#include <algorithm>
#include <bit>
#include <cmath>

#include "analysis/base/require.h"

namespace loadstair::estimate {

namespace {

constexpr std::size_t kLanes = Generator::kLanes;
using Lanes = std::array<std::uint64_t, kLanes>;
using State = std::array<Lanes, 4>;

/// One step of xoshiro256++ in every lane; plain loops of fixed length, so that compilers use vectors.
Lanes stepped(State& s) {
  Lanes result;
  for (std::size_t i = 0; i < kLanes; ++i) {
    const std::uint64_t sum = s[0][i] + s[3][i];
    result[i] = ((sum << 23U) | (sum >> 41U)) + s[0][i];
  }
  for (std::size_t i = 0; i < kLanes; ++i) {
    const std::uint64_t t = s[1][i] << 17U;
    s[2][i] ^= s[0][i];
    s[3][i] ^= s[1][i];
    s[1][i] ^= s[2][i];
    s[0][i] ^= s[3][i];
    s[2][i] ^= t;
    s[3][i] = (s[3][i] << 45U) | (s[3][i] >> 19U);
  }
  return result;
}

/// 52 bits as the fraction of a number in [1, 2), then down to (0, 1): exact, and without a conversion that
/// vectors lack.
double open_unit(std::uint64_t bits) {
  constexpr double kOneLessHalfStep = 1 - 0x1p-53;
  return std::bit_cast<double>((bits >> 12U) | 0x3FF0000000000000U) - kOneLessHalfStep;
}

template <std::size_t N>
double polynomial(const std::array<double, N>& ascending, double x) {
  double sum = ascending[N - 1];
  for (std::size_t i = N - 1; i-- > 0;) sum = sum * x + ascending[i];
  return sum;
}

// Wichura 1988, PPND16.
constexpr std::array<double, 8> kCentreAbove{
    3.3871328727963666080e0,  1.3314166789178437745e+2, 1.9715909503065514427e+3, 1.3731693765509461125e+4,
    4.5921953931549871457e+4, 6.7265770927008700853e+4, 3.3430575583588128105e+4, 2.5090809287301226727e+3};
constexpr std::array<double, 8> kCentreBelow{1.0,
                                             4.2313330701600911252e+1,
                                             6.8718700749205790830e+2,
                                             5.3941960214247511077e+3,
                                             2.1213794301586595867e+4,
                                             3.9307895800092710610e+4,
                                             2.8729085735721942674e+4,
                                             5.2264952788528545610e+3};
constexpr std::array<double, 8> kNearAbove{1.42343711074968357734e0,  4.63033784615654529590e0,
                                           5.76949722146069140550e0,  3.64784832476320460504e0,
                                           1.27045825245236838258e0,  2.41780725177450611770e-1,
                                           2.27238449892691845833e-2, 7.74545014278341407640e-4};
constexpr std::array<double, 8> kNearBelow{1.0,
                                           2.05319162663775882187e0,
                                           1.67638483018380384940e0,
                                           6.89767334985100004550e-1,
                                           1.48103976427480074590e-1,
                                           1.51986665636164571966e-2,
                                           5.47593808499534494600e-4,
                                           1.05075007164441684324e-9};
constexpr std::array<double, 8> kFarAbove{6.65790464350110377720e0,  5.46378491116411436990e0,
                                          1.78482653991729133580e0,  2.96560571828504891230e-1,
                                          2.65321895265761230930e-2, 1.24266094738807843860e-3,
                                          2.71155556874348757815e-5, 2.01033439929228813265e-7};
constexpr std::array<double, 8> kFarBelow{1.0,
                                          5.99832206555887937690e-1,
                                          1.36929880922735805310e-1,
                                          1.48753612908506148525e-2,
                                          7.86869131745613259100e-4,
                                          1.84631831751005468180e-5,
                                          1.42151175831644588870e-7,
                                          2.04426310338993978564e-15};
constexpr double kCentre = 0.425;
constexpr double kCentreSquared = 0.180625;

double central_quantile(double q) {
  const double r = kCentreSquared - q * q;
  return q * polynomial(kCentreAbove, r) / polynomial(kCentreBelow, r);
}

double tail_quantile(double p) {
  const double r = std::sqrt(-std::log(std::min(p, 1 - p)));
  const double size = r <= 5 ? polynomial(kNearAbove, r - 1.6) / polynomial(kNearBelow, r - 1.6)
                             : polynomial(kFarAbove, r - 5) / polynomial(kFarBelow, r - 5);
  return p < 0.5 ? -size : size;
}

}  // namespace

std::uint64_t mixed(std::uint64_t value) {
  value += 0x9E3779B97F4A7C15U;
  value = (value ^ (value >> 30U)) * 0xBF58476D1CE4E5B9U;
  value = (value ^ (value >> 27U)) * 0x94D049BB133111EBU;
  return value ^ (value >> 31U);
}

double normal_quantile(double p) {
  const double q = p - 0.5;
  return std::abs(q) <= kCentre ? central_quantile(q) : tail_quantile(p);
}

Generator::Generator(std::uint64_t seed) {
  std::uint64_t counter = seed;
  for (std::size_t lane = 0; lane < kLanes; ++lane) {
    for (auto& word : state_) {
      word[lane] = mixed(counter);
      counter += 0x9E3779B97F4A7C15U;
    }
  }
}

std::array<std::uint64_t, Generator::kLanes> Generator::next() {
  return stepped(state_);
}

void Generator::uniform(std::span<double> out) {
  State state = state_;
  std::size_t done = 0;
  for (; done + kLanes <= out.size(); done += kLanes) {
    const Lanes bits = stepped(state);
    for (std::size_t i = 0; i < kLanes; ++i) out[done + i] = open_unit(bits[i]);
  }
  if (done < out.size()) {
    const Lanes bits = stepped(state);
    for (std::size_t i = 0; done < out.size(); ++i, ++done) out[done] = open_unit(bits[i]);
  }
  state_ = state;
}

void Generator::normal(std::span<double> out) {
  // The centre for all in one straight loop, then the 15 % in the tails one by one.
  constexpr std::size_t kPart = 256;
  std::array<double, kPart> p{};
  for (std::size_t from = 0; from < out.size(); from += kPart) {
    const std::size_t count = std::min(kPart, out.size() - from);
    const std::span<double> part = out.subspan(from, count);
    uniform(std::span{p}.first(count));
    for (std::size_t i = 0; i < count; ++i) part[i] = central_quantile(p[i] - 0.5);
    for (std::size_t i = 0; i < count; ++i) {
      if (std::abs(p[i] - 0.5) > kCentre) part[i] = tail_quantile(p[i]);
    }
  }
}

double Generator::one_uniform() {
  if (left_count_ == 0) {
    const Lanes bits = stepped(state_);
    for (std::size_t i = 0; i < kLanes; ++i) left_[i] = open_unit(bits[i]);
    left_count_ = kLanes;
  }
  return left_[kLanes - left_count_--];
}

void Generator::chi_squared_per_freedom(double degrees_of_freedom, std::span<double> out) {
  base::require(degrees_of_freedom > 0, "degrees of freedom are above zero");
  const double shape = degrees_of_freedom / 2;
  // A shape below 1 is drawn at shape + 1 and brought down by U^(1/shape).
  const double d = (shape < 1 ? shape + 1 : shape) - 1.0 / 3;
  const double c = 1 / std::sqrt(9 * d);
  for (double& one : out) {
    double gamma = 0;
    while (!(gamma > 0)) {
      const double x = normal_quantile(one_uniform());
      const double root = 1 + c * x;
      if (!(root > 0)) continue;
      const double v = root * root * root;
      if (std::log(one_uniform()) < 0.5 * x * x + d - d * v + d * std::log(v)) gamma = d * v;
    }
    if (shape < 1) gamma *= std::pow(one_uniform(), 1 / shape);
    one = gamma / shape;
  }
}

}  // namespace loadstair::estimate
