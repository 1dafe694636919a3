#include <spdlog/sinks/rotating_file_sink.h>
#include <spdlog/sinks/stdout_sinks.h>
#include <spdlog/spdlog.h>
#include <unistd.h>

#include <boost/asio/as_tuple.hpp>
#include <boost/asio/io_context.hpp>
#include <boost/asio/post.hpp>
#include <boost/asio/signal_set.hpp>
#include <boost/asio/thread_pool.hpp>
#include <boost/asio/use_awaitable.hpp>
#include <filesystem>
#include <iostream>
#include <memory>

#include "daemon/command/commands.h"
#include "daemon/command/daemon_client.h"
#include "daemon/command/user_error.h"
#include "daemon/evaluation/evaluate.h"
#include "daemon/recorder/bench.h"
#include "daemon/sequencer/sequencer.h"
#include "daemon/service/address.h"
#include "daemon/service/api.h"
#include "daemon/setup/hookup.h"
#include "daemon/store/record.h"
#include "drivers/link/clock.h"
#include "drivers/link/task_scope.h"

namespace loadstair::command {
namespace {

namespace asio = boost::asio;
namespace fs = std::filesystem;

constexpr std::size_t kLogBytes = 8U << 20U;

void open_log(const std::string& file) {
  if (file.empty()) {
    spdlog::set_default_logger(spdlog::stderr_logger_mt("loadstair"));
    return;
  }
  spdlog::set_default_logger(spdlog::rotating_logger_mt("loadstair", file, kLogBytes, 4));
  spdlog::flush_on(spdlog::level::info);
}

/// Everything the daemon owns, in the order in which it is made; taken down the other way round.
class Daemon {
 public:
  Daemon(setup::Hookup hookup, const DaemonOptions& options)
      : record_{take(store::Record::open(options.record, store::Mode::write))},
        interrupted_{take(record_.mark_interrupted(utc_ns()))},
        owed_{take(record_.owed_safe_states())},
        writer_{take(store::Writer::start(record_, writer_options()))},
        bench_{std::move(hookup), *clock_, io_.get_executor(), *writer_, bench_options()},
        sequencer_{bench_, sequencer_options()} {
    address_.token = service::make_token();
    address_.record = fs::weakly_canonical(options.record).string();
    address_.version = program_version();
    address_.process = getpid();
    server_ = take(service::HttpServer::listen(io_.get_executor(), *clock_, options.port,
                                               service::make_api({sequencer_, bench_, record_, address_.token,
                                                                  address_.version, pool_.get_executor()})));
    address_.port = server_->port();
  }

  int run() {
    bench_.on_event([](const recorder::BenchEvent& event) {
      spdlog::info("{}: {}: {}", event.kind, event.source, event.text);
    });
    bench_.start();
    server_->start(tasks_);
    tasks_.spawn(serve_until_signal());
    run_until_done();
    const auto closed = writer_->close();
    service::withdraw(address_);
    if (!closed) {
      spdlog::error("{}", closed.refusal().text());
      return kBroken;
    }
    return status_;
  }

 private:
  [[nodiscard]] std::int64_t utc_ns() const { return clock_->now_ns() + clock_->utc_offset_ns(); }

  store::WriterOptions writer_options() {
    store::WriterOptions options;
    options.utc_offset_ns = clock_->utc_offset_ns();
    options.on_failure = [this](const store::Failure& failure) {
      asio::post(io_, [this, text = failure.text] {
        spdlog::error("{}", text);
        bench_.event("record", "store", text);
        if (sequencer_.busy()) {
          // Refused when the run is ending already: then the safe state is on its way as well.
          if (const auto stopped = sequencer_.stop("the record cannot be written: " + text); !stopped) {
            spdlog::info("{}", stopped.refusal().text());
          }
        }
      });
    };
    return options;
  }

  recorder::BenchOptions bench_options() {
    recorder::BenchOptions options;
    options.background = [this](std::function<void()> job) { asio::post(pool_, std::move(job)); };
    return options;
  }

  static sequencer::SequencerOptions sequencer_options() {
    sequencer::SequencerOptions options;
    options.program_version = program_version();
    options.method_version = std::string{evaluation::kMethodVersion};
    if (const char* zone = std::getenv("TZ"); zone != nullptr && *zone != '\0') options.zone = zone;
    return options;
  }

  /// What leaves a handler must not end the process with the bench live: the run is stopped, and all goes on.
  void run_until_done() {
    for (;;) {
      try {
        io_.run();
        return;
      } catch (const std::exception& error) {
        spdlog::error("a fault of the program: {}", error.what());
        if (const auto stopped = sequencer_.stop(std::string{"a fault of the program: "} + error.what());
            !stopped) {
          spdlog::info("{}", stopped.refusal().text());
        }
      }
    }
  }

  asio::awaitable<void> serve_until_signal() {
    // A closed terminal or a lost connection asks the daemon to end as well: in its safe state.
    asio::signal_set signals{io_, SIGINT, SIGTERM, SIGHUP};
    if (!interrupted_.empty()) spdlog::warn("run {} was interrupted", interrupted_.back());
    if (!owed_.empty()) {
      spdlog::warn("the safe state after run {} was never confirmed; the bench is made safe now",
                   owed_.back());
      tasks_.spawn(sequencer_.make_safe_after_crash(owed_));
    }
    if (const auto published = service::publish(address_); !published) {
      spdlog::error("{}", published.refusal().text());
      status_ = kBroken;
    } else {
      spdlog::info("{} at http://127.0.0.1:{}, record {}", bench_.hookup().bench, address_.port,
                   address_.record);
      co_await signals.async_wait(asio::as_tuple(asio::use_awaitable));
      spdlog::info("ending: safe state first");
    }
    co_await sequencer_.close("the daemon was asked to end");
    co_await bench_.close();
    pool_.join();
    tasks_.cancel();
  }

  static void on_task_failure(std::exception_ptr failure) {
    try {
      std::rethrow_exception(failure);
    } catch (const std::exception& error) {
      spdlog::error("{}", error.what());
    }
  }

  asio::io_context io_{1};
  asio::thread_pool pool_{2};
  std::unique_ptr<link::Clock> clock_ = link::make_real_clock();
  link::TaskScope tasks_{io_.get_executor(), on_task_failure};
  store::Record record_;
  std::vector<store::RunId> interrupted_;
  std::vector<store::RunId> owed_;  ///< runs whose safe state nobody has confirmed yet
  std::unique_ptr<store::Writer> writer_;
  recorder::Bench bench_;
  sequencer::Sequencer sequencer_;
  service::Address address_;
  std::unique_ptr<service::HttpServer> server_;
  int status_ = kGood;
};

}  // namespace

int run_daemon(const DaemonOptions& options) {
  auto hookup = take(setup::load_hookup(options.hookup));
  open_log(options.log);
  return Daemon{std::move(hookup), options}.run();
}

}  // namespace loadstair::command
