// main only composes.
#include <gsl/gsl_errno.h>

#include "daemon/command/commands.h"

int main(int argc, char** argv) {
  gsl_set_error_handler_off();  // every status is checked where it arises
  return loadstair::command::run_program(argc, argv);
}
