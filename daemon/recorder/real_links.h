// The links that a hook-up file declares, as openers.
#pragma once

#include <string>

#include "daemon/setup/hookup.h"
#include "drivers/link/clock.h"
#include "drivers/link/link.h"

namespace loadstair::recorder {

/// A path as the hook-up file means it: relative to its own folder.
[[nodiscard]] std::string beside(const std::string& hookup_file, const std::string& path);

/// "serial bench/shunt at 9600 baud", "tcp 127.0.0.1:5601", "folder bench/scope"
[[nodiscard]] std::string describe(const setup::LinkChoice& link);

/// Serial or TCP. Precondition: not a folder.
[[nodiscard]] link::Opener real_opener(link::Clock& clock, const std::string& hookup_file,
                                       const setup::LinkChoice& choice);

}  // namespace loadstair::recorder
