#include <fcntl.h>
#include <sys/file.h>

#include <boost/asio/as_tuple.hpp>
#include <boost/asio/io_context.hpp>
#include <boost/asio/signal_set.hpp>
#include <boost/asio/use_awaitable.hpp>
#include <filesystem>
#include <fstream>
#include <iostream>
#include <sstream>

#include "analysis/base/number.h"
#include "daemon/command/commands.h"
#include "daemon/command/rehearsed_bench.h"
#include "daemon/command/user_error.h"
#include "daemon/setup/hookup.h"
#include "drivers/document/document.h"
#include "drivers/link/task_scope.h"

namespace loadstair::command {
namespace {

namespace asio = boost::asio;
namespace fs = std::filesystem;

std::string read_file(const std::string& path) {
  std::ifstream in{path, std::ios::binary};
  if (!in) throw UserError{path + ": cannot be read"};
  std::ostringstream text;
  text << in.rdbuf();
  return text.str();
}

/// The hook-up file with every link pointing at its simulated instrument; all else, comments included, as it
/// was.
std::string with_rehearsed_links(const setup::Hookup& hookup,
                                 const std::vector<rehearsal::Endpoint>& endpoints,
                                 const std::string& captures) {
  std::string text = hookup.text;
  for (std::size_t i = 0; i < hookup.instruments.size(); ++i) {
    std::string link;
    if (hookup.instruments[i].link.kind == setup::LinkKind::folder) {
      link = "{\"folder\": " + document::print_text(captures) + "}";
    }
    for (const auto& endpoint : endpoints) {
      if (endpoint.instrument != hookup.instruments[i].name) continue;
      if (endpoint.link == rehearsal::LinkKind::pty) {
        link = "{\"serial\": " + document::print_text(endpoint.path) +
               ", \"baud\": " + base::print_integer(endpoint.baud) + "}";
      } else if (endpoint.link == rehearsal::LinkKind::tcp) {
        link = "{\"tcp\": " + document::print_text(endpoint.host + ":" + base::print_integer(endpoint.port)) +
               "}";
      }
    }
    if (link.empty()) continue;
    text = take(document::replace_value(
        text, "instruments/" + base::print_integer(static_cast<std::int64_t>(i)) + "/link", link));
  }
  return text;
}

void write_whole(const std::string& path, const std::string& text) {
  const std::string fresh = path + ".new";
  std::ofstream{fresh, std::ios::binary} << text;
  fs::rename(fresh, path);
}

asio::awaitable<void> until_asked(asio::io_context& io, rehearsal::RehearsedBench& bench) {
  asio::signal_set signals{io, SIGINT, SIGTERM};
  co_await signals.async_wait(asio::as_tuple(asio::use_awaitable));
  co_await bench.close();
}

}  // namespace

int run_rehearsal(const RehearseOptions& options) {
  const auto hookup = take(setup::load_hookup(options.hookup));
  RehearsalChoice choice;
  fs::create_directories(options.folder);
  choice.folder = fs::canonical(options.folder).string();
  const int lock = open((choice.folder + "/lock").c_str(), O_RDWR | O_CREAT | O_CLOEXEC, 0600);
  if (lock < 0 || flock(lock, LOCK_EX | LOCK_NB) != 0) {
    throw UserError{choice.folder + ": another rehearsal uses this folder; name another one with --folder"};
  }
  choice.captures = options.captures.empty() ? choice.folder + "/scope" : options.captures;
  fs::create_directories(choice.captures);
  choice.captures = fs::canonical(choice.captures).string();
  choice.log_path = options.log.empty() ? choice.folder + "/rehearsal.log" : options.log;
  choice.seed = options.seed;
  choice.run = options.visit;
  if (!options.faults.empty()) choice.faults = take(rehearsal::parse_faults(read_file(options.faults)));

  asio::io_context io{1};
  const auto clock = link::make_real_clock();
  rehearsal::RehearsedBench bench{io.get_executor(), *clock, take(describe_rehearsal(hookup, choice))};
  take(bench.start());
  const std::string rehearsed = choice.folder + "/hookup.json";
  write_whole(rehearsed, with_rehearsed_links(hookup, bench.endpoints(), choice.captures));
  std::cout << "Rehearsing " << hookup.bench << " (seed " << options.seed
            << "). To use it:\n  loadstair daemon --hookup " << rehearsed << std::endl;

  link::TaskScope tasks{io.get_executor(),
                        [](std::exception_ptr failure) { std::rethrow_exception(failure); }};
  tasks.spawn(until_asked(io, bench));
  tasks.spawn([](rehearsal::RehearsedBench& served, link::TaskScope& scope) -> asio::awaitable<void> {
    co_await served.stopped();
    scope.cancel();
  }(bench, tasks));
  io.run();
  return kGood;
}

}  // namespace loadstair::command
