// Whether a step's linear interval bears out: the efficiency's formula on draws of every source. Of this room
// only.
#pragma once

#include <cstdint>
#include <optional>

#include "analysis/efficiency/step.h"
#include "daemon/evaluation/result.h"

namespace loadstair::evaluation {

struct Validated {
  Validation validation;
  std::optional<Quantity> instead;  ///< of the efficiency, where the linear interval does not agree
};

/// Draws powers, burden and leads as analysis/efficiency composes them, and their ratio; the statistical
/// parts are added to it. Blocks of 10^4 draws until stable to a fifth of the tolerance. Where `most_draws`
/// do not reach that, 0.3 or 0.5 of it is aimed at: then the ends must agree within what is left of the
/// tolerance, and up to as much beyond it nothing is decided and the linear interval stays.
/// `input` is what `linear` was made from; a seed of 0 stands for the program's own.
///
/// Returns: nullopt where there is no efficiency, or it is exact.
/// Source: JCGM 101:2008 7.9, 8.1.
[[nodiscard]] std::optional<Validated> validated_efficiency(const efficiency::StepInput& input,
                                                            const efficiency::StepResult& linear,
                                                            std::uint64_t seed, std::size_t most_draws);

/// What each of a run's steps may draw, so that a run with many stays well below a second.
[[nodiscard]] std::size_t most_draws_of(std::size_t steps);

}  // namespace loadstair::evaluation
