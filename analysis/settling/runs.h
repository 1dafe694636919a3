// Runs test on residuals; private to this room.
#pragma once

#include <span>

namespace loadstair::settling {

/// Whether signs of block means of the residuals change often enough for a model that follows the curve.
/// Blocks (at most 40) keep the meter's own correlation from counting. Residuals all of one sign say "no".
/// Source: Wald and Wolfowitz 1940, one-sided at 2.5 %.
bool random_signs(std::span<const double> residual);

}  // namespace loadstair::settling
