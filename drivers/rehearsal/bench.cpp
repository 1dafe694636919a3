#include "drivers/rehearsal/bench.h"

#include <unistd.h>

#include <filesystem>

#include "drivers/rehearsal/bench_core.h"

namespace loadstair::rehearsal {

namespace {

namespace net = boost::asio;

Endpoint endpoint_of(const BenchCore& core, const Station& station) {
  Endpoint e;
  e.instrument = station.description.name;
  e.link = station.description.link;
  e.baud = station.description.baud;
  if (e.link == LinkKind::tcp) {
    e.host = "127.0.0.1";
    e.port = station.port;
  }
  if (e.link == LinkKind::pty) e.path = published_path(core, station);
  return e;
}

base::Outcome<void> open_all(const CorePtr& core) {
  for (const auto& station : core->stations) {
    if (station->description.service == Service::display) continue;
    if (auto opened = open_door(core, *station); !opened) return opened.refusal();
    core->endpoints.push_back(endpoint_of(*core, *station));
    if (station->description.service == Service::text_lines) core->tasks.spawn(print_lines(core, *station));
  }
  for (const Fault& fault : core->description.faults) core->inject(fault);
  if (auto control = open_control(core); !control) return control.refusal();
  return write_endpoints(*core);
}

void close_doors(BenchCore& core) {
  if (core.closing) return;
  core.closing = true;
  for (const auto& station : core.stations) {
    if (station->description.link == LinkKind::pty && station->pty.slave >= 0)
      ::unlink(published_path(core, *station).c_str());
    close_door(*station);
  }
  if (core.control) {
    boost::system::error_code ignored;
    core.control->close(ignored);
    ::unlink((core.description.folder + "/control").c_str());
  }
  core.ask_to_stop();
}

link::Wait close_core(CorePtr core) {
  close_doors(*core);
  co_await core->tasks.close();
}

link::Wait wait_for_stop(CorePtr core) {
  while (!core->stop_asked) co_await core->stop_notice.wait_until(INT64_MAX);
}

net::awaitable<base::Outcome<std::unique_ptr<link::Link>>> open_by_name(CorePtr core,
                                                                        std::string instrument) {
  Station* station = core->find(instrument);
  if (station == nullptr || station->description.link != LinkKind::memory)
    co_return base::Refusal{"memory " + instrument, "this bench has no such instrument on a memory link"};
  co_return open_memory(core, *station);
}

net::awaitable<base::Outcome<std::string>> capture_by_name(CorePtr core, std::string instrument) {
  Station* station = core->find(instrument);
  if (station == nullptr) co_return base::Refusal{instrument, "this bench has no such instrument"};
  co_return co_await capture(core, *station);
}

}  // namespace

RehearsedBench::RehearsedBench(net::any_io_executor executor, link::Clock& clock,
                               BenchDescription description)
    : core_{std::make_shared<BenchCore>(std::move(executor), clock, std::move(description))} {}

RehearsedBench::~RehearsedBench() {
  close_doors(*core_);
  core_->tasks.cancel();
}

base::Outcome<void> RehearsedBench::start() {
  if (auto sound = core_->check(); !sound) return sound.refusal();
  if (!core_->description.folder.empty()) {
    std::error_code error;
    std::filesystem::create_directories(core_->description.folder, error);
    if (error)
      return base::Refusal{core_->description.folder, "the folder cannot be made: " + error.message()};
  }
  if (auto opened = core_->log.open(core_->description.log_path); !opened) return opened.refusal();
  core_->start_ns = core_->clock.now_ns();
  core_->start_utc_offset_ns = core_->clock.utc_offset_ns();
  auto opened = open_all(core_);
  if (!opened) close_doors(*core_);
  return opened;
}

link::Wait RehearsedBench::close() {
  return close_core(core_);
}

link::Wait RehearsedBench::stopped() {
  return wait_for_stop(core_);
}

link::Opener RehearsedBench::opener_for(const std::string& instrument) {
  return [core = core_, instrument] { return open_by_name(core, instrument); };
}

const std::vector<Endpoint>& RehearsedBench::endpoints() const {
  return core_->endpoints;
}

net::awaitable<base::Outcome<TypedAnswer>> RehearsedBench::typed_answer(std::string channel) {
  return rehearsal::typed_answer(core_, std::move(channel));
}

base::Outcome<void> RehearsedBench::perform(const std::string& action) {
  return core_->perform(action);
}

net::awaitable<base::Outcome<std::string>> RehearsedBench::capture(std::string instrument) {
  return capture_by_name(core_, std::move(instrument));
}

void RehearsedBench::inject(Fault fault) {
  core_->inject(std::move(fault));
}

const std::vector<LogEntry>& RehearsedBench::log() const {
  return core_->log.entries();
}

base::Outcome<Truth> RehearsedBench::truth_over(std::int64_t from_ns, std::int64_t to_ns) {
  return core_->truth_over(from_ns, to_ns);
}

base::Outcome<void> RehearsedBench::write_truth(const std::string& path,
                                                const std::vector<TruthWindow>& windows) {
  return core_->write_truth(path, windows);
}

const Plant& RehearsedBench::plant() {
  core_->simulator.advance(core_->now_s());
  return core_->simulator.plant();
}

}  // namespace loadstair::rehearsal
