#include "analysis/base/require.h"

#include <string>

namespace loadstair::base {

void require(bool holds, std::string_view promise, const std::source_location& where) {
  if (holds) return;
  throw BrokenPromise{std::string{where.file_name()} + ":" + std::to_string(where.line()) +
                      ": broken promise: " + std::string{promise}};
}

}  // namespace loadstair::base
