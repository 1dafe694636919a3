// Random draws of the simulation: its own generator, its own distributions, nothing of analysis.
#pragma once

#include <cmath>
#include <cstddef>
#include <cstdint>
#include <numbers>
#include <string_view>

namespace loadstair::simulation {

/// Mixes 64 bits (SplitMix64: Steele, Lea and Flood 2014; constants from memory).
inline std::uint64_t mix(std::uint64_t x) {
  x += 0x9E3779B97F4A7C15ULL;
  x = (x ^ (x >> 30U)) * 0xBF58476D1CE4E5B9ULL;
  x = (x ^ (x >> 27U)) * 0x94D049BB133111EBULL;
  return x ^ (x >> 31U);
}

/// A sequence of draws.
class Draw {
 public:
  explicit Draw(std::uint64_t seed) : state_{mix(seed)} {}

  /// In (0, 1).
  double uniform() {
    state_ += 0x9E3779B97F4A7C15ULL;
    return (static_cast<double>(mix(state_) >> 11U) + 0.5) / 9007199254740992.0;
  }
  double between(double low, double high) { return low + (high - low) * uniform(); }
  /// As often small as large: uniform in the logarithm. Both ends above zero.
  double spread(double low, double high) { return low * std::pow(high / low, uniform()); }
  bool chance(double probability) { return uniform() < probability; }
  std::size_t below(std::size_t many) {
    return static_cast<std::size_t>(uniform() * static_cast<double>(many));
  }
  /// Standard normal (Box and Muller 1958).
  double normal() {
    return std::sqrt(-2.0 * std::log(uniform())) * std::cos(2.0 * std::numbers::pi * uniform());
  }

 private:
  std::uint64_t state_;
};

/// A seed that belongs to a text: the same cause meets the same error wherever it is asked for.
inline std::uint64_t seed_for(std::uint64_t seed, std::string_view text) {
  for (const char c : text) seed = mix(seed ^ static_cast<unsigned char>(c));
  return seed;
}

/// Distribution function of the standard normal.
inline double grade(double z) {
  return 0.5 * std::erfc(-z / std::numbers::sqrt2);
}

}  // namespace loadstair::simulation
