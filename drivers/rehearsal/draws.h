// Random draws of the rehearsal: its own generator and its own distributions, shared with nothing.
// A draw is named by a key, not by its turn: the same bench draws the same errors however it is asked.
#pragma once

#include <cstdint>
#include <initializer_list>
#include <string_view>

namespace loadstair::rehearsal {

/// PCG32 (XSH-RR 64/32), M. E. O'Neill, "PCG: A family of simple fast space-efficient statistically good
/// algorithms for random number generation", 2014.
class Pcg32 {
 public:
  Pcg32(std::uint64_t state, std::uint64_t stream);

  std::uint32_t next();
  /// 53 random bits, inside (0, 1).
  double uniform();
  /// Standard normal: Box and Muller 1958, the cosine branch.
  double normal();

 private:
  std::uint64_t state_ = 0;
  std::uint64_t increment_;
};

/// A 64-bit key from numbers and a name (finaliser of SplitMix64, Steele, Lea, Flood 2014).
[[nodiscard]] std::uint64_t key_of(std::uint64_t seed, std::string_view name,
                                   std::initializer_list<std::uint64_t> numbers = {});
/// The one standard normal draw of a key.
[[nodiscard]] double normal_draw(std::uint64_t key);
/// The one draw of a key that is uniform inside (-1, 1).
[[nodiscard]] double symmetric_draw(std::uint64_t key);
/// Distribution function of the standard normal, 2 F(z) - 1.
[[nodiscard]] double normal_to_symmetric(double z);

}  // namespace loadstair::rehearsal
