#include "analysis/estimate/generator.h"

#include <algorithm>
#include <bit>
#include <cmath>
#include <cstring>

#include "analysis/base/require.h"

namespace loadstair::estimate {

namespace {

constexpr std::size_t kLanes = Generator::kLanes;
using Lanes = std::array<std::uint64_t, kLanes>;
/// Four words that compilers hold in vector registers, as wide as the machine has them.
using Vector [[gnu::vector_size(kLanes * sizeof(std::uint64_t))]] = std::uint64_t;

/// xoshiro256++ in every lane; a copy of a generator's state for the length of a loop.
class Stepper {
 public:
  explicit Stepper(std::array<Lanes, 4>& home) : home_{home} { std::memcpy(&s_, &home, sizeof s_); }
  ~Stepper() { std::memcpy(&home_, &s_, sizeof s_); }
  Stepper(const Stepper&) = delete;
  Stepper& operator=(const Stepper&) = delete;

  /// By reference: a vector wider than the machine's cannot be returned the same way everywhere.
  void step(Vector& result) {
    const Vector sum = s_[0] + s_[3];
    result = ((sum << 23U) | (sum >> 41U)) + s_[0];
    const Vector t = s_[1] << 17U;
    s_[2] ^= s_[0];
    s_[3] ^= s_[1];
    s_[1] ^= s_[2];
    s_[0] ^= s_[3];
    s_[2] ^= t;
    s_[3] = (s_[3] << 45U) | (s_[3] >> 19U);
  }

  Lanes step_as_lanes() {
    Lanes out;
    Vector bits;
    step(bits);
    std::memcpy(&out, &bits, sizeof out);
    return out;
  }

 private:
  std::array<Lanes, 4>& home_;
  Vector s_[4];
};

constexpr double kOneLessHalfStep = 1 - 0x1p-53;

/// 52 bits as the fraction of a number in [1, 2), then down to (0, 1): exact, and without a conversion that
/// vectors lack.
double open_unit(std::uint64_t bits) {
  return std::bit_cast<double>((bits >> 12U) | 0x3FF0000000000000U) - kOneLessHalfStep;
}

/// The layers of a ziggurat over exp(-x^2/2): all of one area, the lowest with the tail beyond its edge.
struct Ziggurat {
  static constexpr std::size_t kLayers = 128;
  static constexpr double kEdge = 3.442619855899;
  static constexpr double kArea = 9.91256303526217e-3;

  std::array<double, kLayers + 1> x{};  ///< edges, from the lowest layer up
  std::array<double, kLayers> inner{};  ///< the part of a layer's width that is below the curve for certain

  Ziggurat() {
    double height = std::exp(-0.5 * kEdge * kEdge);
    x[0] = kArea / height;
    x[1] = kEdge;
    for (std::size_t i = 2; i < kLayers; ++i) {
      x[i] = std::sqrt(-2 * std::log(kArea / x[i - 1] + height));
      height = std::exp(-0.5 * x[i] * x[i]);
    }
    x[kLayers] = 0;
    for (std::size_t i = 0; i < kLayers; ++i) inner[i] = x[i + 1] / x[i];
  }
};

const Ziggurat& ziggurat() {
  static const Ziggurat layers;
  return layers;
}

}  // namespace

std::uint64_t mixed(std::uint64_t value) {
  value += 0x9E3779B97F4A7C15U;
  value = (value ^ (value >> 30U)) * 0xBF58476D1CE4E5B9U;
  value = (value ^ (value >> 27U)) * 0x94D049BB133111EBU;
  return value ^ (value >> 31U);
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
  return Stepper{state_}.step_as_lanes();
}

void Generator::uniform(std::span<double> out) {
  fill(out, kOneLessHalfStep);
}

void Generator::centred(std::span<double> out) {
  fill(out, kOneLessHalfStep + 0.5);
}

void Generator::fill(std::span<double> out, double one_less_shift) {
  Stepper stepper{state_};
  std::size_t done = 0;
  for (; done + kLanes <= out.size(); done += kLanes) {
    // As open_unit(), four at a time.
    Vector bits;
    stepper.step(bits);
    bits = (bits >> 12U) | 0x3FF0000000000000U;
    std::memcpy(&out[done], &bits, sizeof bits);
    for (std::size_t i = 0; i < kLanes; ++i) out[done + i] -= one_less_shift;
  }
  if (done == out.size()) return;
  const Lanes bits = stepper.step_as_lanes();
  for (std::size_t i = 0; done < out.size(); ++i, ++done)
    out[done] = open_unit(bits[i]) - (one_less_shift - kOneLessHalfStep);
}

std::uint64_t Generator::one() {
  if (left_count_ == 0) {
    left_ = next();
    left_count_ = kLanes;
  }
  return left_[kLanes - left_count_--];
}

double Generator::one_uniform() {
  return open_unit(one());
}

double Generator::normal_from(std::uint64_t bits) {
  const Ziggurat& layers = ziggurat();
  while (true) {
    // The lowest seven bits choose the layer, the highest 52 the place in it.
    const std::size_t layer = bits % Ziggurat::kLayers;
    const double place = 2 * open_unit(bits) - 1;
    const double x = place * layers.x[layer];
    if (std::abs(place) < layers.inner[layer]) return x;
    if (layer == 0) {
      // The tail beyond the edge: Marsaglia 1964.
      double beyond = 0;
      double height = 0;
      do {
        beyond = -std::log(one_uniform()) / Ziggurat::kEdge;
        height = -std::log(one_uniform());
      } while (2 * height < beyond * beyond);
      return place < 0 ? -Ziggurat::kEdge - beyond : Ziggurat::kEdge + beyond;
    }
    const double low = std::exp(-0.5 * (layers.x[layer] * layers.x[layer] - x * x));
    const double high = std::exp(-0.5 * (layers.x[layer + 1] * layers.x[layer + 1] - x * x));
    if (high + one_uniform() * (low - high) < 1) return x;
    bits = one();
  }
}

void Generator::normal(std::span<double> out) {
  const Ziggurat& layers = ziggurat();
  constexpr std::size_t kPart = 256;
  std::array<std::uint64_t, kPart> bits{};
  for (std::size_t from = 0; from < out.size(); from += kPart) {
    const std::size_t count = std::min(kPart, out.size() - from);
    {
      Stepper stepper{state_};
      for (std::size_t i = 0; i < count; i += kLanes) {
        Vector four;
        stepper.step(four);
        std::memcpy(&bits[i], &four, sizeof four);
      }
    }
    for (std::size_t i = 0; i < count; ++i) {
      // 98.8 % are done here; the rest begins anew with the same bits.
      const double place = 2 * open_unit(bits[i]) - 1;
      const std::size_t layer = bits[i] % Ziggurat::kLayers;
      out[from + i] = std::abs(place) < layers.inner[layer] ? place * layers.x[layer] : normal_from(bits[i]);
    }
  }
}

void Generator::chi_squared_per_freedom(double degrees_of_freedom, std::span<double> out) {
  base::require(degrees_of_freedom > 0, "degrees of freedom are above zero");
  const double shape = degrees_of_freedom / 2;
  // A shape below 1 is drawn at shape + 1 and brought down by U^(1/shape).
  const double d = (shape < 1 ? shape + 1 : shape) - 1.0 / 3;
  const double c = 1 / std::sqrt(9 * d);
  for (double& draw : out) {
    double gamma = 0;
    while (!(gamma > 0)) {
      const double x = normal_from(one());
      const double root = 1 + c * x;
      if (!(root > 0)) continue;
      const double v = root * root * root;
      if (std::log(one_uniform()) < 0.5 * x * x + d - d * v + d * std::log(v)) gamma = d * v;
    }
    if (shape < 1) gamma *= std::pow(one_uniform(), 1 / shape);
    draw = gamma / shape;
  }
}

}  // namespace loadstair::estimate
