// What `loadstair check` says about the files before power is on: what was understood, what is dangerous,
// what would spoil the result. Arithmetic from the ratings only; the forecast of uncertainties is
// evaluation's.
#pragma once

#include <string>
#include <vector>

#include "daemon/setup/hookup.h"
#include "daemon/setup/stair.h"

namespace loadstair::setup {

enum class Severity {
  error,    ///< the bench must not be used so
  warning,  ///< results would be wrong or say less than they seem to
  note,     ///< worth knowing
};
/// "error", "warning", "note".
[[nodiscard]] std::string_view name_of(Severity severity);

struct Finding {
  Severity severity = Severity::note;
  std::string text;
};

/// What the hook-up file says, one line a fact, for a person to compare with the bench.
[[nodiscard]] std::vector<std::string> explain(const Hookup& hookup);
/// What the stair will do, one line a step, how long it takes at most, and what its results are held against.
/// hookup  where the units of set points are known from; nullptr: they are left out
[[nodiscard]] std::vector<std::string> explain(const Stair& stair, const Hookup* hookup = nullptr);

/// Everything that needs saying, worst first: isolation on live nodes, lead drops that nobody declared, AC
/// power that will be apparent power only, undeclared accuracy, guards that act on nothing, and the usual
/// cautions for what this bench is. `stair` may be null; what needs ratings is then left out.
[[nodiscard]] std::vector<Finding> cautions(const Hookup& hookup, const Stair* stair);

/// How fast a guard can be, and what it can do.
struct GuardForecast {
  std::string name;
  double worst_s = 0.0;          ///< from crossing the limit to the decision: conversion, polling, debounce
  double worst_missing_s = 0.0;  ///< from the last reading to acting on its absence
  bool acts = false;             ///< a control is there that can be made safe
};
/// Precondition: match(stair, hookup) is good.
[[nodiscard]] std::vector<GuardForecast> forecast_guards(const Stair& stair, const Hookup& hookup);

/// The caution that goes with every prompt for a hand on the bench; one or two sentences, fitting to the
/// bench.
[[nodiscard]] std::string hand_caution(const Hookup& hookup);

}  // namespace loadstair::setup
