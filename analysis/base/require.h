// Promises of our own code, active in every build.
#pragma once

#include <stdexcept>
#include <string_view>

namespace loadstair::base {

/// Thrown when our own code broke a promise. Ends the owning scope; the sequencer answers it with the safe
/// state.
struct BrokenPromise : std::logic_error {
  using std::logic_error::logic_error;
};

/// Throws BrokenPromise with the place of the call when `holds` is false. Never for what a peer or a user
/// sent. (The builtins instead of std::source_location: clang 14, which runs the sanitizers, has none with
/// this library.)
void require(bool holds, std::string_view promise, const char* file = __builtin_FILE(),
             int line = __builtin_LINE());

}  // namespace loadstair::base
