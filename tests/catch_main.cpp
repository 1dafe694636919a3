// The one main of every Catch2 test program.
#define CATCH_CONFIG_RUNNER
#include <gsl/gsl_errno.h>

#include <catch2/catch.hpp>

int main(int argc, char** argv) {
  gsl_set_error_handler_off();  // as every main of the program does: statuses are checked instead
  return Catch::Session().run(argc, argv);
}
