// command: main and the subcommands: what a person or a script calls. Composes the rooms, prints, asks.
// Not for measuring, deciding or storing anything itself.
#pragma once

#include <stdexcept>
#include <string>

#include "analysis/base/outcome.h"

namespace loadstair::command {

/// Exit statuses of every command.
enum ExitStatus : int {
  kGood = 0,
  kSaysNo = 1,     ///< the bench or the result says no
  kUserInput = 2,  ///< what the user gave is wrong
  kBroken = 3,     ///< something broke
};

/// A refusal of what a user gave; caught once, in run_program.
struct UserError : std::runtime_error {
  using std::runtime_error::runtime_error;
  explicit UserError(const base::Refusal& refusal) : std::runtime_error{refusal.text()} {}
};

/// The value, or a UserError.
template <class T>
T take(base::Outcome<T> outcome) {
  if (!outcome) throw UserError{outcome.refusal()};
  if constexpr (!std::is_void_v<T>) return std::move(outcome).value();
}

}  // namespace loadstair::command
