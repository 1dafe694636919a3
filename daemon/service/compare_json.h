// Comparisons of runs as JSON. Translation only.
#pragma once

#include <nlohmann/json_fwd.hpp>

#include "analysis/base/outcome.h"
#include "daemon/evaluation/compare.h"
#include "daemon/store/reader.h"

namespace loadstair::service {

/// {"reference", "run", "reference_unit", "unit", "levels", "weighted", "remarks"}; of a level: {"label",
/// "load_w", "difference" (ratio), "loss_difference", "decision", "unshared_share", "flips_at" (null: no
/// share does), "narrowing", "text"}; of a weighted figure the same without load and loss.
[[nodiscard]] nlohmann::json to_json(const evaluation::ComparisonResult& comparison);

/// Loads, evaluates and compares two runs.
/// Refusals: as results_of() and evaluation::compare().
[[nodiscard]] base::Outcome<evaluation::ComparisonResult> comparison_of(const store::Reader& reader,
                                                                        store::RunId reference,
                                                                        store::RunId other);

}  // namespace loadstair::service
