// main only composes.
#include <gsl/gsl_errno.h>

#include <csignal>

#include "daemon/command/commands.h"

int main(int argc, char** argv) {
  gsl_set_error_handler_off();  // every status is checked where it arises
  // A reader of our output that goes away must not take the daemon with it while the bench is live.
  std::signal(SIGPIPE, SIG_IGN);
  return loadstair::command::run_program(argc, argv);
}
