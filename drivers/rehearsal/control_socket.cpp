#include <sys/un.h>
#include <unistd.h>

#include <boost/asio/as_tuple.hpp>
#include <boost/asio/use_awaitable.hpp>

#include "analysis/base/number.h"
#include "drivers/rehearsal/bench_core.h"

namespace loadstair::rehearsal {

namespace {

namespace net = boost::asio;
using Local = net::local::stream_protocol;
constexpr auto kToken = net::as_tuple(net::use_awaitable);

std::string take_word(std::string& line) {
  const std::size_t blank = line.find(' ');
  std::string word = line.substr(0, blank);
  line.erase(0, blank == std::string::npos ? line.size() : blank + 1);
  return word;
}

std::string result(const base::Outcome<void>& outcome) {
  return outcome ? "done" : "error " + outcome.refusal().text();
}

std::string keep_window(BenchCore& core, std::string rest) {
  const auto from = base::parse_integer(take_word(rest));
  const auto to = base::parse_integer(take_word(rest));
  if (!from || !to || rest.empty())
    return "error window FROM_NS TO_NS LABEL is wanted, in nanoseconds of UTC";
  core.windows.push_back({rest, *from, *to});
  return "done";
}

std::string add_fault(BenchCore& core, const std::string& script) {
  auto faults = parse_faults(script);
  if (!faults) return "error " + faults.refusal().text();
  if (faults->size() != 1) return "error one fault is wanted: INSTRUMENT KIND at=SECONDS length=SECONDS";
  Fault fault = faults->front();
  Station* station = core.find(fault.instrument);
  if (station == nullptr) return "error there is no instrument \"" + fault.instrument + "\"";
  // From here: seconds from now, queries from the last one on.
  if (fault.at_s) *fault.at_s += core.now_s();
  if (fault.at_query)
    *fault.at_query +=
        station->description.service == Service::text_lines ? station->lines : station->queries;
  core.inject(std::move(fault));
  return "done";
}

net::awaitable<std::string> obey(CorePtr core, std::string line) {
  const std::string word = take_word(line);
  if (word == "typed") {
    const base::Outcome<TypedAnswer> answer = co_await typed_answer(core, line);
    if (!answer) co_return "error " + answer.refusal().text();
    co_return answer->value + " " + answer->unit + " " + answer->range + " " + answer->digit;
  }
  if (word == "capture") {
    Station* station = core->find(line);
    if (station == nullptr) co_return "error there is no instrument \"" + line + "\"";
    const base::Outcome<std::string> path = co_await capture(core, *station);
    co_return path ? *path : "error " + path.refusal().text();
  }
  if (word == "hand") co_return result(core->perform(line));
  if (word == "window") co_return keep_window(*core, line);
  if (word == "truth") co_return result(core->write_truth(line, core->windows));
  if (word == "fault") co_return add_fault(*core, line);
  if (word == "stop") co_return "done";
  co_return "error \"" + word + "\" is not known; typed, hand, capture, window, truth, fault or stop";
}

link::Wait serve(CorePtr core, std::shared_ptr<link::Link> link) {
  while (true) {
    link::Received received = co_await link->read_line("\n", INT64_MAX);
    if (received.status == link::Status::closed) break;
    if (received.status != link::Status::done) continue;
    const bool stop = received.bytes == "stop";
    const std::string reply = co_await obey(core, std::move(received.bytes));
    const link::Status sent = co_await link->write(reply + "\n", core->clock.now_ns() + 1'000'000'000);
    if (stop) core->ask_to_stop();
    if (sent != link::Status::done) break;
  }
  link->close();
}

link::Wait accept_all(CorePtr core, std::shared_ptr<Local::acceptor> acceptor) {
  while (acceptor->is_open()) {
    auto [error, socket] = co_await acceptor->async_accept(kToken);
    if (error == net::error::operation_aborted || !acceptor->is_open()) co_return;
    if (error) {
      co_await core->clock.sleep_for(std::chrono::milliseconds{100});
      continue;
    }
    core->tasks.spawn(
        serve(core, link::adopt_descriptor(core->executor, core->clock, socket.release(), "control")));
  }
}

}  // namespace

base::Outcome<void> open_control(const CorePtr& core) {
  if (core->description.folder.empty()) return {};
  const std::string path = core->description.folder + "/control";
  if (path.size() >= sizeof(sockaddr_un{}.sun_path))
    return base::Refusal{path, "the path of a socket may have at most 107 bytes; choose a shorter folder"};
  ::unlink(path.c_str());
  auto acceptor = std::make_shared<Local::acceptor>(core->executor);
  const Local::endpoint endpoint{path};
  boost::system::error_code error;
  acceptor->open(endpoint.protocol(), error);
  if (!error) acceptor->bind(endpoint, error);
  if (!error) acceptor->listen(net::socket_base::max_listen_connections, error);
  if (error) return base::Refusal{path, "the control socket cannot be made here: " + error.message()};
  core->control = acceptor;
  core->tasks.spawn(accept_all(core, std::move(acceptor)));
  return {};
}

}  // namespace loadstair::rehearsal
