// A child of ours: the program itself, started again as another command.
#pragma once

#include <string>
#include <vector>

namespace loadstair::command {

/// Ends the child (SIGTERM, then SIGKILL after the grace time) when it goes out of scope.
class ChildProcess {
 public:
  /// Starts this program with `arguments`; its output goes to `log_file`. The child gets SIGTERM when we die.
  /// Throws std::runtime_error when it cannot be started.
  ChildProcess(const std::vector<std::string>& arguments, const std::string& log_file);
  ~ChildProcess();
  ChildProcess(const ChildProcess&) = delete;
  ChildProcess& operator=(const ChildProcess&) = delete;

  [[nodiscard]] bool running();
  /// Asks it to end, waits for at most `grace_s` seconds, then kills it. Returns its exit status; -1 when
  /// killed.
  int end(double grace_s = 10.0);
  [[nodiscard]] int process() const { return process_; }

 private:
  int process_ = -1;
  int status_ = 0;
};

}  // namespace loadstair::command
