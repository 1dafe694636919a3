// A pseudo terminal as a rehearsed instrument needs it: slave set raw and held open, its rate looked at.
#pragma once

#include <string>

#include "analysis/base/outcome.h"

namespace loadstair::rehearsal {

/// An open pair. `master` is handed to a link; `slave` stays here, so that the other side may come and go.
struct Pty {
  int master = -1;
  int slave = -1;
  std::string path;  ///< of the slave
};

/// Refusal: the system has no pty left, or none at all.
[[nodiscard]] base::Outcome<Pty> open_pty(int baud);

/// True when the rate that is set on the slave is not `baud`. A pty cannot be set to odd rates: they never
/// differ.
[[nodiscard]] bool rate_differs(int slave, int baud);

/// Bytes that wait for the other side to read them.
[[nodiscard]] int unread(int slave);

/// Points `link` at `target`, replacing an older symlink; nothing else is ever replaced. Refusal: something
/// else has that name, or the folder is not writable.
[[nodiscard]] base::Outcome<void> publish(const std::string& target, const std::string& link);

}  // namespace loadstair::rehearsal
