// A whole bench in one process and in virtual time: rehearsed instruments behind memory links, recorder,
// sequencer, record and evaluation. What the daemon composes, without its process, its sockets and its
// waiting.
#pragma once

#include <functional>
#include <string>
#include <vector>

#include "daemon/command/rehearsed_bench.h"
#include "daemon/evaluation/evaluate.h"
#include "daemon/sequencer/sequencer.h"
#include "daemon/setup/hookup.h"
#include "daemon/setup/stair.h"
#include "daemon/store/reader.h"
#include "drivers/rehearsal/bench.h"

namespace loadstair::whole {

struct VirtualChoice {
  std::uint64_t seed = 1;
  std::uint64_t visit = 1;
  std::vector<rehearsal::Fault> faults;
  std::string record;       ///< path; empty: a temporary file, removed again
  std::string captures;     ///< folder for the simulated scope; empty: steps take no captures
  double limit_s = 7200.0;  ///< of virtual time
  /// Called about ten times a virtual second with what the sequencer says: for tests that interfere.
  std::function<void(sequencer::Sequencer&, const sequencer::Snapshot&)> each_look;
  /// Changes the simulated bench beyond what the hook-up file says.
  std::function<void(rehearsal::BenchDescription&)> adjust;
  /// Whether efficiencies are held against Monte Carlo: most of the cost of a run in virtual time.
  evaluation::Validate validate = evaluation::Validate::yes;
  bool resume_holds = false;  ///< a person resumes every hold after 5 s
};

struct StepTruth {
  std::string label;
  rehearsal::Truth truth;
  bool known = false;  ///< the step had an averaging window
};

struct VirtualRun {
  store::StoredRun stored;
  evaluation::RunResult result;
  std::vector<StepTruth> truths;  ///< one a step
  std::vector<rehearsal::LogEntry> log;
  std::vector<store::StoredReply> replies;
  sequencer::Snapshot last;
  bool source_off = false;  ///< at the end, on the simulated plant
  bool load_off = false;
  double virtual_s = 0.0;
};

/// Runs the stair once. Throws std::runtime_error where something that must not fail does.
[[nodiscard]] VirtualRun run_virtually(const setup::Hookup& hookup, setup::Stair stair,
                                       const VirtualChoice& choice);

/// Files of sample-captures, read from the source tree.
[[nodiscard]] setup::Hookup sample_hookup(const std::string& name = "north_bench.hookup.json");
[[nodiscard]] setup::Stair sample_stair(const std::string& name = "marten.stair.json");

}  // namespace loadstair::whole
