#include "daemon/command/child_process.h"

#include <fcntl.h>
#include <poll.h>
#include <signal.h>
#include <sys/prctl.h>
#include <sys/wait.h>
#include <unistd.h>

#include <chrono>
#include <stdexcept>

namespace loadstair::command {

ChildProcess::ChildProcess(const std::vector<std::string>& arguments, const std::string& log_file) {
  std::vector<std::string> words{"loadstair"};
  words.insert(words.end(), arguments.begin(), arguments.end());
  std::vector<char*> pointers;
  pointers.reserve(words.size() + 1);
  for (auto& word : words) pointers.push_back(word.data());
  pointers.push_back(nullptr);
  const int log = open(log_file.c_str(), O_WRONLY | O_CREAT | O_APPEND | O_CLOEXEC, 0644);
  if (log < 0) throw std::runtime_error{log_file + ": cannot be written"};
  const int parent = getpid();
  process_ = fork();
  if (process_ == 0) {
    prctl(PR_SET_PDEATHSIG, SIGTERM);
    if (getppid() != parent) _exit(127);
    setpgid(0, 0);  // Ctrl-C reaches the parent only, which then ends us in order
    dup2(log, STDOUT_FILENO);
    dup2(log, STDERR_FILENO);
    const int nothing = open("/dev/null", O_RDONLY);
    dup2(nothing, STDIN_FILENO);
    execv("/proc/self/exe", pointers.data());
    _exit(127);
  }
  close(log);
  if (process_ < 0)
    throw std::runtime_error{"cannot start " + arguments.front() + " as a process of its own"};
}

ChildProcess::~ChildProcess() {
  end();
}

bool ChildProcess::running() {
  if (process_ <= 0) return false;
  int status = 0;
  if (waitpid(process_, &status, WNOHANG) == 0) return true;
  status_ = WIFEXITED(status) ? WEXITSTATUS(status) : -1;
  process_ = -1;
  return false;
}

int ChildProcess::end(double grace_s) {
  if (!running()) return status_;
  kill(process_, SIGTERM);
  const auto until = std::chrono::steady_clock::now() + std::chrono::duration<double>{grace_s};
  while (running()) {
    if (std::chrono::steady_clock::now() > until) kill(process_, SIGKILL);
    poll(nullptr, 0, 20);
  }
  return status_;
}

}  // namespace loadstair::command
