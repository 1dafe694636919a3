#include <unistd.h>

#include <boost/asio/io_context.hpp>
#include <filesystem>
#include <iostream>
#include <nlohmann/json.hpp>

#include "analysis/base/number.h"
#include "daemon/command/commands.h"
#include "daemon/command/daemon_client.h"
#include "daemon/command/forecast_text.h"
#include "daemon/command/user_error.h"
#include "daemon/recorder/bench.h"
#include "daemon/service/address.h"
#include "daemon/service/forecast_json.h"
#include "daemon/service/state_json.h"
#include "daemon/setup/explain.h"
#include "daemon/setup/hookup.h"
#include "daemon/setup/stair.h"
#include "daemon/store/record.h"
#include "drivers/link/clock.h"
#include "drivers/link/task_scope.h"

namespace loadstair::command {
namespace {

namespace asio = boost::asio;
namespace fs = std::filesystem;
using nlohmann::json;

constexpr std::chrono::seconds kAskLimit{4};

bool all_ready(const recorder::Bench& bench) {
  for (const auto& instrument : bench.instruments()) {
    if (!instrument.ready && instrument.state != "watching folder") return false;
  }
  for (const auto& channel : bench.channels()) {
    if (!channel.typed && !channel.value) return false;
  }
  return true;
}

/// Connects to every instrument, waits until each has been heard or the limit is over, sends nothing but
/// queries.
struct Answers {
  json instruments, channels;
};

Answers ask_instruments(const setup::Hookup& hookup) {
  // The bench wants a record to write to; this one holds events only and is removed again.
  const fs::path scratch =
      fs::path{take(service::runtime_folder())} / ("check-" + base::print_integer(getpid()) + ".db");
  Answers answers;
  {
    auto record = take(store::Record::open(scratch.string(), store::Mode::write));
    const auto writer = take(store::Writer::start(record));
    asio::io_context io{1};
    const auto clock = link::make_real_clock();
    recorder::Bench bench{hookup, *clock, io.get_executor(), *writer};
    link::TaskScope tasks{io.get_executor(),
                          [](std::exception_ptr failure) { std::rethrow_exception(failure); }};
    tasks.spawn([](recorder::Bench& asked, link::Clock& time, Answers& found) -> asio::awaitable<void> {
      asked.start();
      const auto until = time.now_ns() + std::chrono::nanoseconds{kAskLimit}.count();
      while (!all_ready(asked) && time.now_ns() < until)
        co_await time.sleep_for(std::chrono::milliseconds{50});
      found.instruments = service::to_json(asked.instruments());
      found.channels = service::to_json(asked.channels());
      // The last thing that was heard of an instrument that is not there says why.
      for (const auto& event : asked.recent_events()) {
        for (auto& instrument : found.instruments) {
          if (instrument["name"] == event.source && !instrument["ready"].get<bool>())
            instrument["problem"] = event.text;
        }
      }
      co_await asked.close();
    }(bench, *clock, answers));
    io.run();
  }
  for (const char* suffix : {"", "-wal", "-shm", "-lock"}) {
    std::error_code ignored;
    fs::remove(scratch.string() + suffix, ignored);
  }
  return answers;
}

/// The running daemon holds the links when it serves the same hook-up; then it is asked instead.
Answers answers_for(const setup::Hookup& hookup) {
  for (const auto& address : service::living_daemons()) {
    const auto state = DaemonClient{address}.get("state");
    if (state && (*state)["hookup"] == hookup.text) return {(*state)["instruments"], (*state)["channels"]};
  }
  return ask_instruments(hookup);
}

bool all_there(const Answers& answers) {
  for (const auto& instrument : answers.instruments) {
    if (!instrument["ready"].get<bool>() && instrument["state"] != "watching folder") return false;
  }
  for (const auto& channel : answers.channels) {
    if (!channel["typed"].get<bool>() && !channel["value"].is_number()) return false;
  }
  return true;
}

void print_answers(const Answers& answers) {
  std::cout << "\nInstruments\n";
  for (const auto& instrument : answers.instruments) {
    const std::string state = instrument["state"];
    const std::string identity = instrument["identity"];
    std::cout << "  " << instrument["name"].get<std::string>() << " ("
              << instrument["link"].get<std::string>() << "): " << state
              << (identity.empty() ? "" : ", says \"" + identity + "\"")
              << (instrument.contains("problem") ? ": " + instrument["problem"].get<std::string>() : "")
              << "\n";
  }
  std::cout << "\nChannels\n";
  for (const auto& channel : answers.channels) {
    std::cout << "  " << channel["name"].get<std::string>() << ": ";
    if (channel["typed"].get<bool>()) {
      std::cout << "typed at each step\n";
    } else if (channel["value"].is_number()) {
      std::cout << base::print_significant(channel["value"].get<double>(), 6) << " "
                << channel["unit"].get<std::string>() << "\n";
    } else {
      std::cout << "no reading\n";
    }
  }
}

/// How fast each guard is and whether it can do anything; a person must know before power is on.
void print_guards(const setup::Stair& stair, const setup::Hookup& hookup) {
  if (stair.guards.empty()) return;
  std::cout << "\nGuards (conveniences on top of real protection)\n";
  for (const auto& guard : setup::forecast_guards(stair, hookup)) {
    std::cout << "  " << guard.name << ": decides at most " << base::print_significant(guard.worst_s, 2)
              << " s after the limit is crossed, " << base::print_significant(guard.worst_missing_s, 2)
              << " s after the last reading"
              << (guard.acts ? "\n" : "; ALARM ONLY: you are the stop, nothing here can be switched off\n");
  }
}

/// What the run would give if it were made now.
json forecast_of(const setup::Hookup& hookup, const setup::Stair& stair) {
  const auto clock = link::make_real_clock();
  const auto now_ns = clock->now_ns() + clock->utc_offset_ns();
  return service::to_json(evaluation::forecast(hookup, stair, now_ns));
}

}  // namespace

int run_check(const CheckOptions& options) {
  const auto hookup = take(setup::load_hookup(options.hookup));
  std::optional<setup::Stair> stair;
  if (!options.stair.empty()) {
    stair = take(setup::load_stair(options.stair));
    take(setup::match(*stair, hookup));
  }
  const auto findings = setup::cautions(hookup, stair ? &*stair : nullptr);
  bool good = true;
  json found = json::array();
  for (const auto& finding : findings) {
    good = good && finding.severity != setup::Severity::error;
    found.push_back({{"severity", std::string{setup::name_of(finding.severity)}}, {"text", finding.text}});
  }
  std::optional<Answers> answers;
  if (!options.offline) answers = answers_for(hookup);
  good = good && (!answers || all_there(*answers));

  const json forecast = stair ? forecast_of(hookup, *stair) : json{};
  if (options.json) {
    json result = {{"findings", found}};
    if (stair) result["forecast"] = forecast;
    if (answers) {
      result["instruments"] = answers->instruments;
      result["channels"] = answers->channels;
    }
    std::cout << result.dump(2) << "\n";
    return good ? kGood : kSaysNo;
  }
  for (const auto& line : setup::explain(hookup)) std::cout << line << "\n";
  if (stair) {
    std::cout << "\n";
    for (const auto& line : setup::explain(*stair, &hookup)) std::cout << line << "\n";
  }
  if (answers) print_answers(*answers);
  if (stair) std::cout << forecast_text(forecast);
  if (stair) print_guards(*stair, hookup);
  std::cout << "\nFindings and cautions\n";
  for (const auto& finding : findings) {
    std::cout << "  " << setup::name_of(finding.severity) << ": " << finding.text << "\n";
  }
  std::cout << (good ? "\nNothing found that forbids a run.\n" : "\nNot ready: see above.\n");
  return good ? kGood : kSaysNo;
}

}  // namespace loadstair::command
