#include <CLI/CLI.hpp>
#include <exception>
#include <iostream>

#include "daemon/command/capture_command.h"
#include "daemon/command/commands.h"
#include "daemon/command/daemon_client.h"
#include "daemon/command/user_error.h"
#include "drivers/document/reader.h"

namespace loadstair::command {
namespace {

constexpr const char* kCautions =
    "Loadstair is not a safety device. Its guards are conveniences on top of real protection: a hardware "
    "emergency\n"
    "stop within reach, fuses, and local rules and licensed practice come first.";

/// One subcommand: its options, its worked example, what it runs.
template <class Options, class Declare>
void add(CLI::App& app, int& status, const char* name, const char* does, const char* example,
         int (*run)(const Options&), Declare declare) {
  auto* command = app.add_subcommand(name, does);
  command->footer(std::string{"Example:\n  "} + example);
  auto options = std::make_shared<Options>();
  declare(*command, *options);
  command->callback([&status, options, run] { status = run(*options); });
}

/// A seed is a whole number from 0 that fits; CLI11 alone would wrap a negative one around.
std::string seed_problem(const std::string& text) {
  const bool digits = !text.empty() && text.find_first_not_of("0123456789") == std::string::npos;
  return digits && text.size() <= 18 ? "" : "a seed is a whole number from 0 with at most 18 digits";
}

void declare_demo(CLI::App& command, DemoOptions& options) {
  command.add_option("--out", options.out, "folder for record, captures and truth")->capture_default_str();
  command.add_option("--seed", options.seed, "which simulated bench: fixes every error that is drawn")
      ->check(seed_problem)
      ->capture_default_str();
  command.add_flag("--headless", options.headless, "plain lines, nothing that waits for a person");
  command.add_option("--hookup", options.hookup,
                     "hook-up file with a rehearsal section (default: the sample)");
  command.add_option("--stair", options.stair, "stair file (default: the sample)");
}

void declare_capture(CLI::App& command, CaptureArguments& arguments) {
  command.add_option("FILE", arguments.file, "a scope's CSV export")->required();
  command.add_option("--voltage", arguments.voltage, "COLUMN[:SCALE], a header name or a number from 1");
  command.add_option("--current", arguments.current, "COLUMN[:SCALE]");
  command.add_option("--harmonics", arguments.harmonics, "highest order")->capture_default_str();
  command.add_option(
      "--crest-band", arguments.crest_band_hz,
      "crest factor also of the signal up to this frequency, Hz (median of the cycles' peaks)");
  command.add_flag("--json", arguments.json, "results as JSON");
  command.add_option("--separator", arguments.separator, "of the fields: , ; | or tab");
  command.add_option("--decimal", arguments.decimal, "mark in numbers: . or ,");
  command.add_option("--header-line", arguments.header_line, "line that names the columns, 0 for none");
  command.add_option("--unit-line", arguments.unit_line, "line that gives their units, 0 for none");
  command.add_option("--data-line", arguments.data_line, "first line of numbers");
  command.add_option("--time-column", arguments.time_column, "header name, number from 1, or none");
  command.add_option("--interval", arguments.interval, "sampling interval in seconds");
}

int run_capture_command(const CaptureArguments& arguments) {
  return run_capture(arguments, std::cout, std::cerr);
}

void declare_all(CLI::App& app, int& status) {
  add<DemoOptions>(app, status, "demo",
                   "Rehearses a load-step run on a simulated bench and shows its results",
                   "loadstair demo --out out --seed 7", run_demo, declare_demo);
  add<CheckOptions>(app, status, "check", "Checks the files, talks to the instruments, states the cautions",
                    "loadstair check north_bench.hookup.json marten.stair.json", run_check,
                    [](CLI::App& command, CheckOptions& options) {
                      command.add_option("HOOKUP", options.hookup, "hook-up file")->required();
                      command.add_option("STAIR", options.stair, "stair file");
                      command.add_flag("--offline", options.offline, "files only, no instrument is asked");
                      command.add_flag("--json", options.json, "findings as JSON");
                    });
  add<DaemonOptions>(app, status, "daemon", "Owns instruments and record, serves the commands",
                     "loadstair daemon --hookup north_bench.hookup.json --record north_bench.db", run_daemon,
                     [](CLI::App& command, DaemonOptions& options) {
                       command.add_option("--hookup", options.hookup, "hook-up file")->required();
                       command
                           .add_option("--record", options.record, "the bench's record, made when missing")
                           ->capture_default_str();
                       command.add_option("--port", options.port, "on 127.0.0.1; 0: any free one")
                           ->check(CLI::Range(0, 65535));
                       command.add_option("--log", options.log, "file instead of standard error");
                     });
  add<RunOptions>(app, status, "run", "Runs a stair through the daemon; Ctrl-C ends it in the safe state",
                  "loadstair run marten.stair.json", run_stair, [](CLI::App& command, RunOptions& options) {
                    command.add_option("STAIR", options.stair, "stair file")->required();
                    command.add_option("--record", options.record, "which daemon, when several are running");
                    command.add_flag("--json", options.json, "results as JSON at the end");
                  });
  add<RehearseOptions>(
      app, status, "rehearse", "Only the simulated instruments of a hook-up file",
      "loadstair rehearse north_bench.hookup.json --folder bench", run_rehearsal,
      [](CLI::App& command, RehearseOptions& options) {
        command.add_option("HOOKUP", options.hookup, "hook-up file with a rehearsal section")->required();
        command.add_option("--folder", options.folder, "for ptys, control socket and hook-up")
            ->capture_default_str();
        command.add_option("--captures", options.captures, "where the simulated scope drops files");
        command.add_option("--faults", options.faults, "file with a fault script");
        command.add_option("--log", options.log, "log of every reply with its query");
        command.add_option("--seed", options.seed, "which bench")->check(seed_problem)->capture_default_str();
        command.add_option("--visit", options.visit, "which visit to that bench")->capture_default_str();
      });
  const auto declare_record = [](CLI::App& command, ShowOptions& options) {
    command.add_option("--record", options.record, "record file (default: the running daemon's)");
    command.add_flag("--json", options.json, "as JSON");
  };
  add<ShowOptions>(app, status, "runs", "Lists the runs of a record", "loadstair runs --record out/record.db",
                   list_runs, declare_record);
  add<ShowOptions>(app, status, "show", "Results of one run, per step and as a curve",
                   "loadstair show 3 --record out/record.db", show_run,
                   [declare_record](CLI::App& command, ShowOptions& options) {
                     command.add_option("RUN", options.run, "number of the run (default: the last)");
                     command.add_option("--budget", options.budget,
                                        "label or number of a step: where its uncertainty comes from");
                     declare_record(command, options);
                   });
  add<CompareOptions>(
      app, status, "compare", "Differences between runs that are resolved, and those that are not",
      "loadstair compare 1 4 --record bench.db", compare_runs,
      [](CLI::App& command, CompareOptions& options) {
        command.add_option("RUN", options.runs, "numbers of two runs or more; the first is the reference")
            ->required()
            ->expected(2, 100);
        command.add_option("--record", options.record, "record file (default: the running daemon's)");
        command.add_flag("--json", options.json,
                         "as JSON: one object, or a list of them for more than two runs");
      });
  add<CaptureArguments>(app, status, "capture", "Analyses a scope's CSV export on its own",
                        "loadstair capture marten_50hz.csv --voltage V_out --current I_out:10",
                        run_capture_command, declare_capture);
}

/// A first word that is no subcommand: the nearest one is named.
void require_known_command(const CLI::App& app, int argc, char** argv) {
  if (argc < 2 || argv[1][0] == '-' || argv[1][0] == '\0') return;
  const std::string word = argv[1];
  std::vector<std::string> names;
  for (const auto* command : app.get_subcommands([](const CLI::App*) { return true; })) {
    if (command->get_name() == word) return;
    names.push_back(command->get_name());
  }
  const std::vector<std::string_view> known{names.begin(), names.end()};
  throw UserError{"there is no command \"" + word + "\"" + document::suggest(word, known)};
}

}  // namespace

int run_program(int argc, char** argv) {
  int status = kGood;
  CLI::App app{
      "Takes power-converter prototypes through load steps: readings that belong together, efficiency with "
      "its\n"
      "interval, evidence that can be checked.",
      "loadstair"};
  app.footer(kCautions);
  app.set_version_flag("--version", program_version());
  app.require_subcommand(1);
  declare_all(app, status);
  try {
    require_known_command(app, argc, argv);
    app.parse(argc, argv);
    return status;
  } catch (const CLI::ParseError& error) {
    return app.exit(error) == 0 ? kGood : kUserInput;
  } catch (const UserError& error) {
    std::cerr << error.what() << "\n";
    return kUserInput;
  } catch (const std::exception& error) {
    std::cerr << "loadstair: " << error.what() << "\n";
    return kBroken;
  }
}

}  // namespace loadstair::command
