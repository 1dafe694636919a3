#include "analysis/settling/runs.h"

#include <algorithm>
#include <cmath>

namespace loadstair::settling {

bool random_signs(std::span<const double> residual) {
  constexpr std::size_t kBlocks = 40;
  const std::size_t blocks = std::min(kBlocks, residual.size());
  std::size_t positive = 0;
  std::size_t runs = 0;
  bool before = false;
  for (std::size_t b = 0; b < blocks; ++b) {
    double sum = 0.0;
    for (std::size_t i = b * residual.size() / blocks; i < (b + 1) * residual.size() / blocks; ++i)
      sum += residual[i];
    const bool up = sum > 0.0;
    positive += up ? 1 : 0;
    if (b == 0 || up != before) ++runs;
    before = up;
  }
  const double n1 = static_cast<double>(positive);
  const double n2 = static_cast<double>(blocks) - n1;
  if (n1 < 1.0 || n2 < 1.0) return false;
  const double n = n1 + n2;
  const double expected = 1.0 + 2.0 * n1 * n2 / n;
  const double variance = 2.0 * n1 * n2 * (2.0 * n1 * n2 - n) / (n * n * (n - 1.0));
  return static_cast<double>(runs) - expected > -1.96 * std::sqrt(variance);
}

}  // namespace loadstair::settling
