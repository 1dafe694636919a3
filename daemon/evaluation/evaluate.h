// evaluation: a recorded run to analysis inputs to results; and the live side of the same conversions for
// guards, page and sequencer. Nothing converted is stored. Not for printing results, nor for reading files
// that people write.
#pragma once

#include <string_view>

#include "daemon/evaluation/live.h"    // IWYU pragma: export
#include "daemon/evaluation/result.h"  // IWYU pragma: export
#include "daemon/setup/hookup.h"
#include "daemon/setup/stair.h"
#include "daemon/store/reader.h"

namespace loadstair::evaluation {

/// Changes whenever the same record may give other figures.
inline constexpr std::string_view kMethodVersion = "2";

/// Whether each efficiency's interval is held against Monte Carlo: most of the cost of a short run. Where it
/// is left out (a forecast's, or thousands of simulated runs), the linear interval stands.
enum class Validate { yes, no };

/// All results of a run, also of one that is still going on or was stopped.
/// run     as loaded, with the bytes of its captures (without them: no capture results, and each says so)
/// hookup, stair   read from the run's own texts (with its amendments applied), never from today's files
/// Returns: what can be had, and a reason for everything that cannot. Same record, same bits.
/// Cost:    linear in the readings inside the windows, plus the captures' analysis. No locale, clock or I/O.
[[nodiscard]] RunResult evaluate(const store::StoredRun& run, const setup::Hookup& hookup,
                                 const setup::Stair& stair, Validate validating = Validate::yes);

}  // namespace loadstair::evaluation
