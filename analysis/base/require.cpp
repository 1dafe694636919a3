#include "analysis/base/require.h"

#include <string>

namespace loadstair::base {

void require(bool holds, std::string_view promise, const char* file, int line) {
  if (holds) return;
  throw BrokenPromise{std::string{file} + ":" + std::to_string(line) +
                      ": broken promise: " + std::string{promise}};
}

}  // namespace loadstair::base
