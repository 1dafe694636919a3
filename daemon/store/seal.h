// Digests of runs, and the chain that they form (R7, R9). Of this room only.
#pragma once

#include "daemon/store/connection.h"
#include "daemon/store/items.h"

namespace loadstair::store {

/// Digests the run and appends it to the chain. Throws SqlFault; a run that is still running is refused as a
/// row is.
void seal_run(Record::Connection& connection, RunId run, std::int64_t when_utc_ns);

/// Recomputes the chain. Throws SqlFault.
[[nodiscard]] base::Outcome<void> verify_chain(Record::Connection& connection, const std::string& path);

}  // namespace loadstair::store
