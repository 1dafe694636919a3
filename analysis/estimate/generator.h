// Random draws for Monte Carlo: the same numbers on every machine for one stored seed, however many threads.
#pragma once

#include <array>
#include <cstddef>
#include <cstdint>
#include <span>

namespace loadstair::estimate {

/// One step of a 64-bit counter through a mixing function; seeds generators and joins seeds with names.
/// Source: splitmix64, Steele, Lea and Flood 2014.
[[nodiscard]] std::uint64_t mixed(std::uint64_t value);

/// Four xoshiro256++ generators side by side, whose numbers are interleaved. Not for secrets.
/// Source: xoshiro256++ 1.0, Blackman and Vigna 2019 (public domain); each lane is seeded by splitmix64.
class Generator {
 public:
  static constexpr std::size_t kLanes = 4;

  explicit Generator(std::uint64_t seed);

  /// The next number of every lane.
  [[nodiscard]] std::array<std::uint64_t, kLanes> next();

  /// Fills with numbers in the open interval (0, 1): (k + 1/2)/2^52. Numbers left over in the last group of
  /// four are dropped.
  void uniform(std::span<double> out);
  /// The same numbers less 1/2: in (-1/2, 1/2).
  void centred(std::span<double> out);
  /// Standard normal. Source: Marsaglia and Tsang 2000, Journal of Statistical Software 5, 8 (ziggurat), in
  /// the form of Doornik 2005 (128 layers; layer and place from different bits of one number).
  void normal(std::span<double> out);
  /// Chi-squared over its degrees of freedom (above zero): mean 1. Source: Marsaglia and Tsang 2000, ACM
  /// Transactions on Mathematical Software 26, 3 (gamma variables by rejection).
  void chi_squared_per_freedom(double degrees_of_freedom, std::span<double> out);

 private:
  void fill(std::span<double> out, double one_less_shift);
  [[nodiscard]] std::uint64_t one();
  [[nodiscard]] double one_uniform();
  [[nodiscard]] double normal_from(std::uint64_t bits);

  std::array<std::array<std::uint64_t, kLanes>, 4> state_{};
  std::array<std::uint64_t, kLanes> left_{};
  std::size_t left_count_ = 0;
};

}  // namespace loadstair::estimate
