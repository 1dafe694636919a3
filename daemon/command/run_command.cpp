#include <filesystem>
#include <fstream>
#include <iostream>
#include <sstream>

#include "daemon/command/commands.h"
#include "daemon/command/result_text.h"
#include "daemon/command/run_loop.h"
#include "daemon/command/terminal.h"
#include "daemon/command/user_error.h"
#include "daemon/setup/stair.h"

namespace loadstair::command {

int run_stair(const RunOptions& options) {
  const auto stair = take(setup::load_stair(options.stair));
  const auto daemon = running_daemon(options.record);
  if (!daemon) {
    throw UserError{"no daemon is running; start one with: loadstair daemon --hookup HOOKUP"};
  }
  catch_interrupts();
  const auto started = daemon->post("runs", {{"stair", stair.text}, {"file", options.stair}});
  if (!started) throw UserError{started.refusal()};
  const auto run = (*started)["run"].get<std::int64_t>();
  const auto person = person_at_terminal();
  RunOutcome outcome;
  try {
    outcome = follow_run(*daemon, run, *person);
  } catch (...) {
    // Nobody is left to attend to the run: it must not wait with the power on.
    if (!daemon->post("run/stop", {{"reason", "nobody attends to the run any more"}})) {
      std::cerr << "The run could not be stopped: the daemon does not answer.\n";
    }
    throw;
  }
  const auto result = final_result(*daemon, run);
  std::cout << (options.json ? result.dump(2) + "\n" : result_table(result));
  for (const auto& warning : outcome.warnings) std::cerr << warning << "\n";
  if (!outcome.done) std::cerr << "The run did not reach its end: " << outcome.reason << "\n";
  return outcome.done && outcome.warnings.empty() ? kGood : kSaysNo;
}

}  // namespace loadstair::command
