// Results as JSON: what `show --json` prints and the service answers. Translation only.
#pragma once

#include <nlohmann/json_fwd.hpp>
#include <vector>

#include "analysis/base/outcome.h"
#include "daemon/evaluation/evaluate.h"
#include "daemon/store/reader.h"

namespace loadstair::service {

/// {"value", "unit", "low", "high", "level", "method"} and, when linear, "expanded" and "k";
/// {"value": null, "why"} where there is no estimate. A figure whose uncertainty is not known is no estimate
/// either: it stands as "indicated" beside the reason.
[[nodiscard]] nlohmann::json to_json(const evaluation::Quantity& quantity);
[[nodiscard]] nlohmann::json to_json(const evaluation::RunResult& result);
[[nodiscard]] nlohmann::json to_json(const std::vector<store::RunSummary>& runs);

/// UTC nanoseconds as ISO 8601 with milliseconds, "2026-03-14T09:26:53.589Z".
[[nodiscard]] std::string iso_time(std::int64_t utc_ns);

/// Loads a run and evaluates it from its own texts.
/// Refusals: no such run; a stored text that this program cannot read.
[[nodiscard]] base::Outcome<evaluation::RunResult> results_of(const store::Reader& reader, store::RunId run);

}  // namespace loadstair::service
