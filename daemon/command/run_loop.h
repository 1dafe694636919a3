// Follows a run through the daemon until it ends: progress, prompts, Ctrl-C.
#pragma once

#include <memory>
#include <nlohmann/json.hpp>

#include "daemon/command/daemon_client.h"

namespace loadstair::command {

/// Who does what a prompt asks for, and saves captures.
class Person {
 public:
  virtual ~Person() = default;
  /// Called again and again while a prompt is open; answers through `daemon` when it can.
  /// run  the run's state, with the prompt and what was typed in this step
  virtual void attend(const DaemonClient& daemon, const nlohmann::json& run) = 0;
  /// Called again and again while the run is held with the power on.
  virtual void decide_hold(const DaemonClient& daemon, const nlohmann::json& run) = 0;
  /// Called once per step when a capture is wanted.
  virtual void save_capture(const std::string& step_label) = 0;
};

/// The person at this terminal: shows the cautions, waits for a deliberate answer.
[[nodiscard]] std::unique_ptr<Person> person_at_terminal();

struct RunOutcome {
  bool done = false;   ///< the stair was climbed to its end
  std::string reason;  ///< why not
  std::vector<std::string> warnings;
};

/// Returns when the run has ended and the bench is in its safe state. An interrupt (terminal.h) stops the
/// run. Throws std::runtime_error when the daemon is lost.
[[nodiscard]] RunOutcome follow_run(const DaemonClient& daemon, std::int64_t run, Person& person);

/// Results of a run that has ended; waits a moment until its end is in the record.
/// Throws std::runtime_error when there are none.
[[nodiscard]] nlohmann::json final_result(const DaemonClient& daemon, std::int64_t run);

}  // namespace loadstair::command
