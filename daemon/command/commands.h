// The subcommands, each as a function of its options. Each returns an exit status (user_error.h) and throws
// UserError for what the user gave.
#pragma once

#include <cstdint>
#include <string>
#include <vector>

namespace loadstair::command {

struct DaemonOptions {
  std::string hookup;
  std::string record = "loadstair.db";
  int port = 0;
  std::string log;  ///< file; empty: standard error
};
/// Owns instruments and record until SIGTERM or SIGINT.
int run_daemon(const DaemonOptions& options);

struct RunOptions {
  std::string stair;
  std::string record;
  bool json = false;
};
/// Runs a stair through the daemon, with progress and prompts; Ctrl-C ends it in the safe state.
int run_stair(const RunOptions& options);

struct RehearseOptions {
  std::string hookup;
  std::string folder = "rehearsal";
  std::string captures;  ///< where the simulated scope drops its files; empty: FOLDER/scope
  std::string faults;    ///< file with a fault script
  std::string log;       ///< empty: FOLDER/rehearsal.log
  std::uint64_t seed = 1;
  std::uint64_t visit = 1;
};
/// Only the simulated instruments, until SIGTERM or SIGINT.
int run_rehearsal(const RehearseOptions& options);

struct DemoOptions {
  std::string out = "demo-out";
  std::uint64_t seed = 1;
  bool headless = false;
  std::string hookup;  ///< empty: the sample that the program carries
  std::string stair;
};
int run_demo(const DemoOptions& options);

struct CheckOptions {
  std::string hookup;
  std::string stair;
  bool offline = false;
  bool json = false;
};
int run_check(const CheckOptions& options);

struct ShowOptions {
  std::int64_t run = 0;  ///< 0: the last one
  std::string record;
  std::string budget;  ///< label or number of a step: its budget instead of the whole; empty: the whole
  bool json = false;
};
int list_runs(const ShowOptions& options);
int show_run(const ShowOptions& options);

struct CompareOptions {
  std::vector<std::int64_t> runs;  ///< the reference first, then those that are compared to it
  std::string record;
  bool json = false;  ///< one object for two runs, a list of them for more
};
int compare_runs(const CompareOptions& options);

/// All of them behind one command line. Never throws.
int run_program(int argc, char** argv);

}  // namespace loadstair::command
