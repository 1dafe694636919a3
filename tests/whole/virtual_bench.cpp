#include "whole/virtual_bench.h"

#include <unistd.h>

#include <boost/asio/io_context.hpp>
#include <filesystem>
#include <stdexcept>

#include "daemon/recorder/bench.h"
#include "daemon/store/record.h"
#include "drivers/link/clock.h"
#include "drivers/link/task_scope.h"

namespace loadstair::whole {
namespace {

namespace asio = boost::asio;
namespace fs = std::filesystem;

constexpr std::int64_t kStartUtcNs = 1'790'000'000'000'000'000;  // a day in September 2026
constexpr std::chrono::milliseconds kLook{100};

template <class T>
T must(base::Outcome<T> outcome) {
  if (!outcome) throw std::runtime_error{outcome.refusal().text()};
  if constexpr (!std::is_void_v<T>) return std::move(outcome).value();
}

[[noreturn]] void rethrow(std::exception_ptr failure) {
  std::rethrow_exception(failure);
}

/// The person at the virtual bench: reads displays, follows prompts, resumes holds if told to.
struct Person {
  sequencer::Sequencer& sequencer;
  rehearsal::RehearsedBench& rehearsed;
  const setup::Stair& stair;
  const VirtualChoice& choice;
  link::Clock& clock;
  std::string scope;

  asio::awaitable<void> attend() {
    std::string captured;
    double held_s = 0.0;
    while (sequencer.busy()) {
      const auto snapshot = sequencer.snapshot();
      if (choice.each_look) choice.each_look(sequencer, snapshot);
      if (snapshot.prompt) co_await answer(*snapshot.prompt);
      if (snapshot.step_phase == sequencer::StepPhase::capture && captured != snapshot.label &&
          !scope.empty()) {
        captured = snapshot.label;
        must(co_await rehearsed.capture(scope));
      }
      held_s = snapshot.phase == sequencer::RunPhase::holding ? held_s + 0.1 : 0.0;
      if (choice.resume_holds && held_s > 5.0) must(sequencer.resume());
      co_await clock.sleep_for(kLook);
    }
  }

  asio::awaitable<void> answer(sequencer::OpenPrompt prompt) {
    if (prompt.kind == sequencer::PromptKind::hand) {
      const auto step = static_cast<std::size_t>(sequencer.snapshot().step);
      const auto action = command::rehearsed_action(stair.steps.at(step), prompt.text);
      if (!action.empty()) must(rehearsed.perform(action));
      if (!sequencer.answer(prompt.id, "rehearsal")) co_return;
      co_return;
    }
    const auto read = must(co_await rehearsed.typed_answer(prompt.channel));
    sequencer::TypedEntry entry{read.value, read.unit, read.range, read.digit,
                                prompt.kind == sequencer::PromptKind::confirm};
    // Refused when a guard closed the prompt meanwhile, or once for an implausible value.
    if (!sequencer.enter_typed(prompt.id, entry, "rehearsal")) co_return;
  }
};

struct Temporary {
  std::string path;
  bool remove = false;
  ~Temporary() {
    if (!remove) return;
    std::error_code ignored;
    for (const char* suffix : {"", "-wal", "-shm", "-lock"}) fs::remove(path + suffix, ignored);
  }
};

void collect(VirtualRun& result, const store::Record& record, store::RunId run, const setup::Hookup& hookup,
             const setup::Stair& stair, rehearsal::RehearsedBench& rehearsed, evaluation::Validate validate) {
  const auto reader = must(record.reader());
  result.stored = must(reader.load_run(run));
  result.replies = must(reader.load_replies(run));
  result.result = evaluation::evaluate(result.stored, hookup, stair, validate);
  for (const auto& step : result.stored.steps) {
    StepTruth truth{step.label, {}, false};
    if (step.average_begin_ns && step.average_end_ns) {
      truth.truth = must(rehearsed.truth_over(*step.average_begin_ns - result.stored.utc_offset_ns,
                                              *step.average_end_ns - result.stored.utc_offset_ns));
      truth.known = true;
    }
    result.truths.push_back(truth);
  }
}

}  // namespace

setup::Hookup sample_hookup(const std::string& name) {
  return must(setup::load_hookup(std::string{LOADSTAIR_SOURCE} + "/sample-captures/" + name));
}

setup::Stair sample_stair(const std::string& name) {
  return must(setup::load_stair(std::string{LOADSTAIR_SOURCE} + "/sample-captures/" + name));
}

VirtualRun run_virtually(const setup::Hookup& hookup, setup::Stair stair, const VirtualChoice& choice) {
  static int number = 0;
  Temporary file{choice.record, choice.record.empty()};
  if (file.remove) {
    file.path = (fs::temp_directory_path() /
                 ("loadstair_virtual_" + std::to_string(getpid()) + "_" + std::to_string(++number) + ".db"))
                    .string();
  }
  setup::Hookup used = hookup;
  for (auto& step : stair.steps) step.capture = step.capture && !choice.captures.empty();
  for (auto& instrument : used.instruments) {
    if (instrument.link.kind == setup::LinkKind::folder) {
      instrument.link.path = choice.captures.empty()
                                 ? fs::temp_directory_path().string() + "/loadstair_no_captures"
                                 : choice.captures;
      fs::create_directories(instrument.link.path);
    }
  }

  asio::io_context io{1};
  const auto clock = link::VirtualClock::make(io, kStartUtcNs);
  command::RehearsalChoice rehearsal_choice;
  rehearsal_choice.seed = choice.seed;
  rehearsal_choice.run = choice.visit;
  rehearsal_choice.faults = choice.faults;
  rehearsal_choice.captures = choice.captures;
  auto description = must(command::describe_rehearsal(used, rehearsal_choice));
  if (choice.adjust) choice.adjust(description);
  rehearsal::RehearsedBench rehearsed{io.get_executor(), *clock, description};
  must(rehearsed.start());

  auto record = must(store::Record::open(file.path, store::Mode::write));
  store::WriterOptions writer_options;
  writer_options.threaded = false;
  writer_options.utc_offset_ns = clock->utc_offset_ns();
  const auto writer = must(store::Writer::start(record, writer_options));

  recorder::BenchOptions bench_options;
  bench_options.opener_for = [&](const setup::Instrument& instrument) {
    return rehearsed.opener_for(instrument.name);
  };
  recorder::Bench bench{used, *clock, io.get_executor(), *writer, bench_options};
  sequencer::SequencerOptions sequencer_options;
  sequencer_options.program_version = "test";
  sequencer::Sequencer sequencer{bench, sequencer_options};
  link::TaskScope tasks{io.get_executor(), rethrow};

  VirtualRun result;
  bench.start();
  const store::RunId run = must(sequencer.start(stair));
  Person person{sequencer, rehearsed, stair, choice, *clock, {}};
  if (!choice.captures.empty() && !used.captures.empty()) person.scope = used.captures.front().instrument;
  tasks.spawn([](Person& at_bench, sequencer::Sequencer& owner, recorder::Bench& owned,
                 rehearsal::RehearsedBench& played, VirtualRun& seen) -> asio::awaitable<void> {
    co_await at_bench.attend();
    seen.last = owner.snapshot();
    seen.virtual_s = static_cast<double>(at_bench.clock.now_ns()) * 1e-9;
    seen.source_off = !played.plant().settings.source_on;
    seen.load_off = !played.plant().settings.load_on;
    co_await owner.close("the test is over");
    co_await owned.close();
    co_await played.close();
  }(person, sequencer, bench, rehearsed, result));
  clock->run(static_cast<std::int64_t>(choice.limit_s * 1e9));
  if (tasks.size() != 0) throw std::runtime_error{"the virtual run did not end within its limit"};
  must(writer->flush());
  collect(result, record, run, used, stair, rehearsed, choice.validate);
  result.log = rehearsed.log();
  must(writer->close());
  return result;
}

}  // namespace loadstair::whole
