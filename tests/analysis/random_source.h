// Random numbers for tests, the same on every machine: the generator is standard, the distributions are our
// own.
#pragma once

#include <cmath>
#include <cstdint>
#include <cstdlib>
#include <numbers>
#include <random>

#include "analysis/base/number.h"

namespace loadstair::tests {

/// The seed of random tests: LOADSTAIR_SEED from the environment, or 1.
inline std::uint64_t seed_of_tests() {
  const char* given = std::getenv("LOADSTAIR_SEED");
  return static_cast<std::uint64_t>(given == nullptr ? 1 : base::parse_integer(given).value_or(1));
}

class RandomSource {
 public:
  explicit RandomSource(std::uint64_t seed) : engine_{seed} {}

  /// In (0, 1).
  double uniform() { return (static_cast<double>(engine_() >> 11U) + 0.5) / 9007199254740992.0; }
  double uniform(double low, double high) { return low + (high - low) * uniform(); }
  std::size_t below(std::size_t many) { return engine_() % many; }
  /// Standard normal (Box and Muller 1958).
  double normal() { return std::sqrt(-2 * std::log(uniform())) * std::cos(2 * std::numbers::pi * uniform()); }

 private:
  std::mt19937_64 engine_;
};

}  // namespace loadstair::tests
