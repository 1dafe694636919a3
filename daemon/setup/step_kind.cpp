#include <algorithm>

#include "daemon/setup/stair.h"

namespace loadstair::setup {

std::string_view name_of(StepKind kind) {
  switch (kind) {
    case StepKind::level:
      return "level";
    case StepKind::zero:
      return "zero";
    case StepKind::tie:
      return "tie";
    case StepKind::closure:
      return "closure";
    case StepKind::no_load:
      return "no load";
    case StepKind::standby:
      return "standby";
  }
  return "";
}

std::vector<std::string> controls_on(const Step& step, const Hookup& hookup) {
  std::vector<std::string> on;
  for (const Control& control : hookup.controls) {
    const bool named = std::find(step.on.begin(), step.on.end(), control.name) != step.on.end();
    bool is_on = true;
    if (step.kind == StepKind::zero) is_on = false;
    if (step.kind == StepKind::tie) is_on = named;
    if (step.kind == StepKind::standby) is_on = step.on.empty() ? control.role == "source" : named;
    if (step.kind == StepKind::no_load) is_on = step.on.empty() ? control.role != "load" : named;
    if (is_on) on.push_back(control.name);
  }
  return on;
}

}  // namespace loadstair::setup
