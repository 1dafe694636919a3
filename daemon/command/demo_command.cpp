#include <poll.h>
#include <unistd.h>

#include <filesystem>
#include <fstream>
#include <iostream>
#include <sstream>

#include "analysis/base/number.h"
#include "daemon/command/child_process.h"
#include "daemon/command/commands.h"
#include "daemon/command/daemon_client.h"
#include "daemon/command/rehearsal_client.h"
#include "daemon/command/rehearsed_bench.h"
#include "daemon/command/result_text.h"
#include "daemon/command/run_loop.h"
#include "daemon/command/terminal.h"
#include "daemon/command/user_error.h"
#include "daemon/service/address.h"
#include "daemon/setup/hookup.h"
#include "daemon/setup/stair.h"
#include "daemon/store/reader.h"
#include "daemon/store/record.h"
#include "embedded/sample_files.h"

namespace loadstair::command {
namespace {

using nlohmann::json;
namespace fs = std::filesystem;

constexpr int kStartLookMs = 50;
constexpr int kStartLooks = 400;  // 20 s for a child to be ready

/// Prompts answered by the simulated bench itself: allowed only because every link is a rehearsed one.
class RehearsedPerson : public Person {
 public:
  RehearsedPerson(std::string control, const setup::Hookup& hookup, const setup::Stair& stair)
      : control_{std::move(control)}, stair_{stair} {
    if (!hookup.captures.empty()) scope_ = hookup.captures.front().instrument;
  }

  void attend(const DaemonClient& daemon, const json& run) override {
    const json& prompt = run["prompt"];
    const auto id = prompt["id"].get<std::int64_t>();
    if (prompt["kind"] == "hand") return follow_hand_prompt(daemon, run, id);
    const auto answer = ask_rehearsal(control_, "typed " + prompt["channel"].get<std::string>());
    if (!answer) throw std::runtime_error{answer.refusal().text()};
    std::istringstream words{*answer};
    std::string value, unit, range, digit;
    words >> value >> unit >> range >> digit;
    const auto entered = daemon.post("prompt/typed", {{"prompt", id},
                                                      {"value", value},
                                                      {"unit", unit},
                                                      {"range", range},
                                                      {"last_digit", digit},
                                                      {"confirmed", prompt["kind"] == "confirm"},
                                                      {"by", "rehearsal"}});
    std::cout << "  " << run["label"].get<std::string>() << ": " << prompt["channel"].get<std::string>()
              << " reads " << value << " " << unit << ", reading " << prompt["round"].get<int>() << " of "
              << prompt["rounds"].get<int>() << (entered ? "" : " (" + entered.refusal().text() + ")")
              << std::endl;
  }

  /// Nobody is there to look after a hold, so a rehearsed run ends instead.
  void decide_hold(const DaemonClient& daemon, const json& run) override {
    const auto stopped = daemon.post("run/stop", {{"reason", "held: " + run["reason"].get<std::string>()}});
    if (!stopped) std::cout << "  " << stopped.refusal().text() << std::endl;
  }

  void save_capture(const std::string& step_label) override {
    if (scope_.empty()) return;
    const auto saved = ask_rehearsal(control_, "capture " + scope_);
    if (!saved) std::cout << "  no capture for " << step_label << ": " << saved.refusal().text() << std::endl;
  }

 private:
  void follow_hand_prompt(const DaemonClient& daemon, const json& run, std::int64_t id) {
    const json& prompt = run["prompt"];
    const std::string text = prompt["text"];
    std::cout << bold(text) << "\n";
    for (const auto& caution : prompt["cautions"]) std::cout << "  ! " << caution.get<std::string>() << "\n";
    const auto step = static_cast<std::size_t>(run["step"].get<int>());
    const std::string action = rehearsed_action(stair_.steps.at(step), text);
    if (!action.empty()) {
      const auto done = ask_rehearsal(control_, "hand " + action);
      if (!done) throw std::runtime_error{done.refusal().text()};
    }
    std::cout << "  (answered by itself: every link of this bench is rehearsed)" << std::endl;
    const auto answered = daemon.post("prompt/answer", {{"prompt", id}, {"by", "rehearsal"}});
    if (!answered) std::cout << "  " << answered.refusal().text() << std::endl;
  }

  std::string control_;
  const setup::Stair& stair_;
  std::string scope_;
};

/// Removed again, whatever happens.
struct TemporaryFolder {
  fs::path path;
  ~TemporaryFolder() {
    std::error_code ignored;
    fs::remove_all(path, ignored);
  }
};

void make_folder(const fs::path& path) {
  std::error_code error;
  fs::create_directories(path, error);
  if (error) {
    throw UserError{path.string() + ": the folder cannot be made (" + error.message() +
                    "); name another one with --out"};
  }
}

void write_file(const fs::path& path, std::string_view text) {
  std::ofstream out{path, std::ios::binary};
  out.write(text.data(), static_cast<std::streamsize>(text.size()));
  if (!out.flush()) throw UserError{path.string() + ": cannot be written"};
}

/// The file given, or the sample of that name, which is written beside the results.
std::string file_or_sample(const std::string& given, const std::string& sample, const fs::path& out) {
  if (!given.empty()) return given;
  for (const auto& file : embedded::sample_files()) {
    if (!file.name.ends_with(sample)) continue;
    write_file(out / sample, file.text);
    return (out / sample).string();
  }
  throw std::runtime_error{"the program does not carry " + sample};
}

void wait_for_file(const fs::path& file, ChildProcess& child, const fs::path& log) {
  for (int look = 0; look < kStartLooks && child.running(); ++look) {
    if (fs::exists(file)) return;
    poll(nullptr, 0, kStartLookMs);
  }
  throw std::runtime_error{"the rehearsed bench did not start; see " + log.string()};
}

DaemonClient wait_for_daemon(const std::string& record, ChildProcess& child, const fs::path& log) {
  for (int look = 0; look < kStartLooks && child.running(); ++look) {
    if (auto daemon = running_daemon(record)) return *daemon;
    poll(nullptr, 0, kStartLookMs);
  }
  throw std::runtime_error{"the daemon did not start; see " + log.string()};
}

/// Tells the simulated plant when the averaging windows were; it writes what was true in them.
void write_truth(const std::string& control, const store::Record& record, std::int64_t run,
                 const fs::path& file) {
  const auto reader = take(record.reader());
  const auto stored = take(reader.load_run(run, {.captures = false}));
  for (const auto& step : stored.steps) {
    if (!step.average_begin_ns || !step.average_end_ns) continue;
    take(ask_rehearsal(control, "window " + base::print_integer(*step.average_begin_ns) + " " +
                                    base::print_integer(*step.average_end_ns) + " " + step.label));
  }
  take(ask_rehearsal(control, "truth " + fs::absolute(file).string()));
}

}  // namespace

int run_demo(const DemoOptions& options) {
  const fs::path out = options.out;
  make_folder(out / "captures");
  const std::string record_file = (out / "record.db").string();
  if (running_daemon(record_file)) {
    throw UserError{record_file +
                    ": a daemon owns this record; let it end first, or name another folder with --out"};
  }
  const std::string hookup_file = file_or_sample(options.hookup, "north_bench.hookup.json", out);
  const std::string stair_file = file_or_sample(options.stair, "marten.stair.json", out);
  const auto hookup = take(setup::load_hookup(hookup_file));
  const auto stair = take(setup::load_stair(stair_file));
  take(setup::match(stair, hookup));
  catch_interrupts();

  // Sockets have short names, so the simulated bench lives in the runtime folder.
  const TemporaryFolder bench{fs::path{take(service::runtime_folder())} /
                              ("bench-" + base::print_integer(getpid()))};
  ChildProcess rehearsal{{"rehearse", hookup_file, "--folder", bench.path.string(), "--captures",
                          (out / "captures").string(), "--log", (out / "rehearsal.log").string(), "--seed",
                          base::print_integer(static_cast<std::int64_t>(options.seed))},
                         (out / "rehearse.log").string()};
  wait_for_file(bench.path / "hookup.json", rehearsal, out / "rehearse.log");
  ChildProcess daemon_process{{"daemon", "--hookup", (bench.path / "hookup.json").string(), "--record",
                               record_file, "--log", (out / "daemon.log").string()},
                              (out / "daemon.log").string()};
  const DaemonClient daemon = wait_for_daemon(record_file, daemon_process, out / "daemon.log");

  std::cout
      << bold("Loadstair rehearses " + hookup.bench + ": " + stair.prototype.name + " revision " +
              stair.prototype.revision + ", unit " + stair.prototype.unit)
      << "\nNothing here is real: converter, source, load and meters are simulated (seed " << options.seed
      << "), with thermal constants of seconds.\nOn a real bench these voltages kill; see the cautions of "
         "`loadstair check`.\nDaemon: http://127.0.0.1:"
      << daemon.address().port << "/api/v1/state\n\n";
  const auto started = daemon.post("runs", {{"stair", stair.text}, {"file", stair_file}});
  if (!started) throw UserError{started.refusal()};
  const auto run = (*started)["run"].get<std::int64_t>();
  RehearsedPerson person{(bench.path / "control").string(), hookup, stair};
  const RunOutcome outcome = follow_run(daemon, run, person);
  const json result = final_result(daemon, run);
  {
    // Read while the daemon is there: its clean stop then leaves the record alone and whole.
    const auto record = take(store::Record::open(record_file, store::Mode::read));
    write_truth((bench.path / "control").string(), record, run, out / "truth.json");
  }
  daemon_process.end();
  rehearsal.end();

  std::cout << "\n"
            << result_table(result) << "\nRecord: " << record_file
            << "\nCaptures: " << (out / "captures").string()
            << "\nWhat was true on the simulated bench: " << (out / "truth.json").string()
            << " (no result is computed from it)\nAgain: loadstair show " << run << " --record "
            << record_file << "\n";
  for (const auto& warning : outcome.warnings) std::cerr << warning << "\n";
  if (!outcome.done) std::cerr << "The run did not reach its end: " << outcome.reason << "\n";
  return outcome.done && outcome.warnings.empty() ? kGood : kSaysNo;
}

}  // namespace loadstair::command
