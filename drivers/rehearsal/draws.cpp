#include "drivers/rehearsal/draws.h"

#include <cmath>
#include <numbers>

namespace loadstair::rehearsal {

namespace {

std::uint64_t mixed(std::uint64_t x) {
  x += 0x9e3779b97f4a7c15ULL;
  x = (x ^ (x >> 30U)) * 0xbf58476d1ce4e5b9ULL;
  x = (x ^ (x >> 27U)) * 0x94d049bb133111ebULL;
  return x ^ (x >> 31U);
}

}  // namespace

Pcg32::Pcg32(std::uint64_t state, std::uint64_t stream) : increment_{(stream << 1U) | 1U} {
  next();
  state_ += state;
  next();
}

std::uint32_t Pcg32::next() {
  const std::uint64_t old = state_;
  state_ = old * 6364136223846793005ULL + increment_;
  const auto shifted = static_cast<std::uint32_t>(((old >> 18U) ^ old) >> 27U);
  const auto turn = static_cast<std::uint32_t>(old >> 59U);
  return (shifted >> turn) | (shifted << ((32U - turn) & 31U));
}

double Pcg32::uniform() {
  const std::uint64_t high = next() >> 5U;
  const std::uint64_t low = next() >> 6U;
  return (static_cast<double>((high << 26U) | low) + 0.5) * 0x1p-53;
}

double Pcg32::normal() {
  const double radius = std::sqrt(-2.0 * std::log(uniform()));
  return radius * std::cos(2.0 * std::numbers::pi * uniform());
}

std::uint64_t key_of(std::uint64_t seed, std::string_view name,
                     std::initializer_list<std::uint64_t> numbers) {
  std::uint64_t key = mixed(seed);
  for (const char c : name) key = mixed(key ^ static_cast<unsigned char>(c));
  for (const std::uint64_t number : numbers) key = mixed(key ^ mixed(number));
  return key;
}

double normal_draw(std::uint64_t key) {
  return Pcg32{key, mixed(key)}.normal();
}

double symmetric_draw(std::uint64_t key) {
  return 2.0 * Pcg32{key, mixed(key)}.uniform() - 1.0;
}

double normal_to_symmetric(double z) {
  return std::erf(z / std::numbers::sqrt2);
}

}  // namespace loadstair::rehearsal
