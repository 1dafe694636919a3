// Plays the instrument's side of a conversation that is written down in a text file, in virtual time.
//
//   profile meter              which of the profiles below; first line
//   identity north bench       what the hook-up file wants the identity to begin with (default)
//   > MEAS:VOLT?               the next line that must come from our side
//   < +3.85012E+02             what the instrument answers (with line end); \xHH, \r, \n as in C
//   << +3.85                   the same without line end
//   greet                      the identity query and its answer
//   ~ 0.25                     nothing happens for so many seconds
//   close                      the instrument vanishes (its end of the link closes)
//   absent 2                   so many attempts to open are refused
//   accept                     goes on with the next link that is opened
//   do make_safe               somebody commands: make_safe, switch_on, apply NAME VALUE, stop
//   = voltage 385.012          a reading: name and value, or the flags in words
//   ! timeout no reply         an event: kind, and how its text begins
//   ? make_safe confirmed      what a command returned, and how its text begins
//   # ...                      a remark
//
// Readings, events and outcomes must come in the order written, and no others.
#pragma once

#include <string>

namespace loadstair::instrument {

/// Plays a file of conversations/. Returns: what did not go as written, or an empty string.
std::string play_conversation(const std::string& path);

}  // namespace loadstair::instrument
