// A fake bench with a sequencer on top, and what the tests of runs ask of it.
#pragma once

#include "daemon/recorder/fake_bench.h"
#include "daemon/sequencer/sequencer.h"

namespace loadstair::testing {

class RunBench : public FakeBench {
 public:
  explicit RunBench(setup::Hookup hookup = fake_hookup(false), sequencer::SequencerOptions options = {},
                    recorder::BenchOptions bench_options = {})
      : FakeBench{std::move(hookup), std::move(bench_options)} {
    options.program_version = "test";
    sequencer = std::make_unique<sequencer::Sequencer>(*bench, std::move(options));
  }
  ~RunBench() { end(); }

  void end() {
    if (!sequencer) return;
    finish(sequencer->close("the test is over"));
    sequencer.reset();
    close();
  }
  store::RunId start(setup::Stair stair) {
    const auto run = sequencer->start(std::move(stair));
    if (!run) FAIL(run.refusal().text());
    return *run;
  }
  [[nodiscard]] sequencer::Snapshot now() const { return sequencer->snapshot(); }
  void run_to(sequencer::StepPhase phase, std::int32_t step = 0, double limit_s = 60.0) {
    run_until([&] { return now().step_phase == phase && now().step == step; }, limit_s);
  }
  void run_to_end(double limit_s = 120.0) {
    run_until([&] { return !sequencer->busy(); }, limit_s);
  }
  [[nodiscard]] bool off() const { return !world.source_on && !world.load_on; }

  std::unique_ptr<sequencer::Sequencer> sequencer;
};

/// A step that waits for nothing but its window.
inline setup::Step quick_step(const std::string& label, double power_w) {
  auto step = fake_step(label, power_w);
  step.soak_s = 0.5;
  step.average_s = 1.0;
  return step;
}

inline setup::Guard guard_on(const std::string& channel) {
  setup::Guard guard;
  guard.name = "guard of " + channel;
  guard.channel = channel;
  return guard;
}

}  // namespace loadstair::testing
