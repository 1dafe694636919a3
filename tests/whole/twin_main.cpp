// usage: twin SEED: the same run as `loadstair demo --seed SEED`, in virtual time; prints one JSON line a
// step: label, efficiency, its interval, what was true.
#include <gsl/gsl_errno.h>

#include <cstdio>
#include <nlohmann/json.hpp>

#include "analysis/base/number.h"
#include "whole/virtual_bench.h"

using namespace loadstair;

int main(int argc, char** argv) {
  gsl_set_error_handler_off();
  if (argc < 2) {
    std::fprintf(stderr, "usage: twin SEED\n");
    return 2;
  }
  whole::VirtualChoice choice;
  choice.seed = static_cast<std::uint64_t>(base::parse_integer(argv[1]).value_or(1));
  const auto run = whole::run_virtually(whole::sample_hookup(), whole::sample_stair(), choice);
  for (std::size_t i = 0; i < run.result.steps.size(); ++i) {
    const auto& step = run.result.steps[i];
    const nlohmann::json line = {
        {"label", step.label},
        {"kind", step.kind},
        {"efficiency", step.efficiency.known ? nlohmann::json(step.efficiency.value) : nullptr},
        {"low", step.efficiency.low},
        {"high", step.efficiency.high},
        {"input_power_w", step.input_power.value},
        {"output_power_w", step.output_power.value},
        {"true_efficiency", run.truths.at(i).truth.efficiency}};
    std::printf("%s\n", line.dump().c_str());
  }
  return 0;
}
