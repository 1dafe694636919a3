#include "drivers/instrument/reading.h"

namespace loadstair::instrument {

std::string_view name_of(EventKind kind) {
  switch (kind) {
    case EventKind::connected:
      return "connected";
    case EventKind::lost:
      return "lost";
    case EventKind::identity_wrong:
      return "identity wrong";
    case EventKind::timeout:
      return "timeout";
    case EventKind::resynchronised:
      return "resynchronised";
    case EventKind::garbage:
      return "garbage";
    case EventKind::overload:
      return "overload";
    case EventKind::unit_changed:
      return "unit changed";
    case EventKind::stale:
      return "stale";
    case EventKind::command_sent:
      return "command sent";
    case EventKind::command_refused:
      return "command refused";
  }
  return "unknown";
}

}  // namespace loadstair::instrument
