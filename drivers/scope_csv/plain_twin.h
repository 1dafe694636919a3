// Inside the room, for tests: the reader without its fast way.
#pragma once

#include <string_view>

#include "analysis/base/outcome.h"
#include "drivers/scope_csv/scope_csv.h"

namespace loadstair::scope_csv {

/// read_scope_csv with every row decoded field by field. Gives the same outcome, slower.
[[nodiscard]] base::Outcome<ScopeFile> read_scope_csv_plainly(std::string_view bytes,
                                                              std::string_view file_name,
                                                              const Options& options = {});

}  // namespace loadstair::scope_csv
