// Joins what the rehearsal says it sent to what the record says was read: the oracle behind "no wrong value
// recorded as good, every fault shows". Its own few lines read the numbers; nothing of drivers/dialect is
// used.
#pragma once

#include <cstddef>
#include <string>
#include <vector>

#include "whole/virtual_bench.h"

namespace loadstair::whole {

/// A fault that the rehearsal logged while the run went on, and of which the record says nothing.
struct HiddenFault {
  std::string instrument;
  std::string kind;  ///< rehearsal::name_of(FaultKind)
  std::string text;  ///< query or line, when, and what was missed
};

struct ReplyJoin {
  std::size_t good_readings = 0;   ///< looked at: linked readings without a flag that forbids their use
  std::size_t typed_values = 0;    ///< looked at: typed answers that nobody corrected
  std::size_t faults = 0;          ///< looked at: replies and lines of the run that a fault touched
  std::vector<std::string> wrong;  ///< good readings that are not what was sent as the answer, a line each
  std::vector<HiddenFault> hidden;

  [[nodiscard]] std::string text() const;  ///< everything that does not join, a line each; empty: all joins
};

/// Every good reading must come from a stored reply whose text the rehearsal sent as the answer to that very
/// query (instrument, query, sent between question and last byte; of several the last, since an instrument
/// answers in order), or as a line that began to arrive when the rehearsal sent it; its value must be the
/// number in that text, and its instant one that the declared times allow. Every typed value must be what the
/// display showed between prompt and entry. Every fault in the log must show: as a flagged reading of that
/// instrument, or an event of that instrument of a fitting kind, within 3 s (a stranger on the line: 5 s); a
/// condition that is told when it begins counts as shown until a good reading ends it.
[[nodiscard]] ReplyJoin join_replies(const VirtualRun& run, const setup::Hookup& hookup);

}  // namespace loadstair::whole
