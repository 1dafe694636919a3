// From a hook-up file to its simulated counterpart: every meter at its declared place, as exact as declared.
#pragma once

#include <cstdint>
#include <string>
#include <vector>

#include "analysis/base/outcome.h"
#include "daemon/setup/hookup.h"
#include "daemon/setup/stair.h"
#include "drivers/rehearsal/bench.h"

namespace loadstair::command {

struct RehearsalChoice {
  std::uint64_t seed = 1;  ///< which bench
  std::uint64_t run = 1;   ///< which visit to it
  std::string captures;    ///< where the scope drops its files; empty: it cannot capture
  std::string folder;      ///< for ptys, sockets and the control socket; empty: memory links
  std::string log_path;    ///< every reply with its query; empty: memory only
  std::vector<rehearsal::Fault> faults;
};

/// Refusal: the hook-up has no "rehearsal" section, or something in it that cannot be simulated (by name).
[[nodiscard]] base::Outcome<rehearsal::BenchDescription> describe_rehearsal(const setup::Hookup& hookup,
                                                                            const RehearsalChoice& choice);

/// What the rehearsed person does when a step asks for something by hand: `text` is the prompt's, either the
/// step's own or that of its change of the wiring. Empty: nothing.
[[nodiscard]] std::string rehearsed_action(const setup::Step& step, const std::string& text);

}  // namespace loadstair::command
