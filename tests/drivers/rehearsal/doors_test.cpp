// The rehearsal behind real ptys, sockets and its control socket, in real time; each wait ends with its
// event.
#include <sys/socket.h>
#include <sys/stat.h>
#include <sys/un.h>
#include <unistd.h>

#include <boost/asio/io_context.hpp>
#include <boost/asio/this_coro.hpp>
#include <catch2/catch.hpp>
#include <filesystem>
#include <fstream>
#include <sstream>

#include "analysis/base/number.h"
#include "drivers/link/task_scope.h"
#include "drivers/rehearsal/bench.h"

namespace loadstair::rehearsal {
namespace {

namespace net = boost::asio;
namespace fs = std::filesystem;

constexpr std::int64_t kSecond_ns = 1'000'000'000;

/// A folder of its own that goes with the test.
struct Folder {
  Folder() {
    std::string name = (fs::temp_directory_path() / "rehearsal-XXXXXX").string();
    REQUIRE(::mkdtemp(name.data()) != nullptr);
    path = name;
  }
  ~Folder() {
    std::error_code ignored;
    fs::remove_all(path, ignored);
  }
  Folder(const Folder&) = delete;
  Folder& operator=(const Folder&) = delete;
  std::string path;
};

BenchDescription described(const std::string& folder) {
  BenchDescription d;
  d.folder = folder;
  d.log_path = folder + "/log.tsv";
  MeterFunction voltage;
  voltage.name = "voltage";
  voltage.ranges = {{600.0, 0.1, 0.5, 0.0, 2.0, 0.0}};
  InstrumentDescription meter;
  meter.name = "input meter";
  meter.link = LinkKind::pty;
  meter.baud = 19200;
  meter.identity = "north bench,meter,M-001,1.0";
  meter.meter.functions = {voltage};
  meter.meter.update_period_s = 0.05;
  meter.meter.integration_s = 0.04;
  meter.queries = {{"MEAS:VOLT:DC?", {"voltage"}}};
  InstrumentDescription source;
  source.name = "source";
  source.link = LinkKind::tcp;
  source.identity = "north bench,source,S-001,1.0";
  source.settings = {{"OUTP {value}", "OUTP?", Knob::source_output, 0.0, 1.0}};
  InstrumentDescription reader;
  reader.name = "thermocouples";
  reader.service = Service::text_lines;
  reader.link = LinkKind::pty;
  reader.meter.update_period_s = 0.05;
  reader.meter.integration_s = 0.04;
  MeterFunction heatsink;
  heatsink.name = "heatsink";
  heatsink.quantity = Quantity::case_temperature;
  heatsink.ranges = {{1000.0, 0.1, 0.0, 0.0, 5.0, 0.0}};
  reader.meter.functions = {heatsink};
  reader.lines = {{{"T1 ", "heatsink", 1.0, " C", 1.0, " F"}}};
  InstrumentDescription scope;
  scope.name = "scope";
  scope.link = LinkKind::tcp;
  scope.identity = "north bench,scope,O-001,1.0";
  scope.scope = ScopeDescription{};
  scope.scope->folder = folder;
  scope.scope->length_s = 0.04;
  scope.scope->channels = {ScopeChannel{}};
  d.instruments = {meter, source, reader, scope};
  d.typed = {{"input voltage", "input meter", "voltage", "V", 1.0, 0.01, 0.01}};
  d.plant.lamps.count = 3;
  return d;
}

/// Runs one script against a bench in real time, at most `limit_s`.
struct RealBench {
  explicit RealBench(BenchDescription description)
      : bench{io.get_executor(), *clock, std::move(description)} {
    const auto started = bench.start();
    INFO((started.ok() ? "" : started.refusal().text()));
    REQUIRE(started.ok());
  }
  template <class Script>
  void play(Script script, double limit_s = 20.0) {
    bool done = false;
    tasks.spawn(wrap(script(*this), bench, done));
    io.run_for(std::chrono::milliseconds{static_cast<long>(1e3 * limit_s)});
    CHECK(done);
  }
  static link::Wait wrap(link::Wait script, RehearsedBench& to_close, bool& done) {
    co_await std::move(script);
    co_await to_close.close();
    done = true;
  }
  const Endpoint& at(const std::string& name) const {
    for (const Endpoint& e : bench.endpoints())
      if (e.instrument == name) return e;
    FAIL("no endpoint of " << name);
    return bench.endpoints().front();
  }

  net::io_context io;
  std::unique_ptr<link::Clock> clock = link::make_real_clock();
  link::TaskScope tasks{io.get_executor(), [](const std::exception_ptr& e) { std::rethrow_exception(e); }};
  RehearsedBench bench;
};

net::awaitable<std::string> ask(link::Clock& clock, link::Link& link, std::string text,
                                double limit_s = 5.0) {
  const std::int64_t deadline = clock.now_ns() + static_cast<std::int64_t>(limit_s * 1e9);
  if (!text.empty()) {
    const link::Status sent = co_await link.write(text + "\n", deadline);
    if (sent != link::Status::done) co_return "(not sent)";
  }
  const link::Received received = co_await link.read_line("\n", deadline);
  if (received.status == link::Status::closed) co_return "(closed)";
  co_return received.status == link::Status::done ? received.bytes : "(none)";
}

// g++ 12 destroys an aggregate that is made within a co_await expression twice.
link::SerialSettings port(std::string path, int baud) {
  return {.path = std::move(path), .baud = baud};
}
link::TcpSettings host(int number) {
  return {.host = "127.0.0.1", .port = number};
}

net::awaitable<std::unique_ptr<link::Link>> serial(link::Clock& clock, std::string path, int baud) {
  auto opened = co_await link::open_serial(clock, port(std::move(path), baud));
  if (!opened) FAIL(opened.refusal().text());
  co_return std::move(opened.value());
}

net::awaitable<std::unique_ptr<link::Link>> tcp(link::Clock& clock, Endpoint at) {
  auto opened = co_await link::open_tcp(clock, host(at.port));
  if (!opened) FAIL(opened.refusal().text());
  co_return std::move(opened.value());
}

std::unique_ptr<link::Link> control(link::Clock& clock, const net::any_io_executor& executor,
                                    const std::string& path) {
  const int fd = ::socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC, 0);
  sockaddr_un address{};
  address.sun_family = AF_UNIX;
  path.copy(address.sun_path, sizeof address.sun_path - 1);
  REQUIRE(::connect(fd, reinterpret_cast<const sockaddr*>(&address), sizeof address) == 0);
  return link::adopt_descriptor(executor, clock, fd, "control");
}

std::string text_of(const std::string& path) {
  std::ifstream in{path};
  std::ostringstream out;
  out << in.rdbuf();
  return out.str();
}

// g++ 12 awaits a co_await inside CHECK more than once.
void expect(const std::string& got, const std::string& wanted) {
  CHECK(got == wanted);
}

TEST_CASE("instruments answer behind a pty at a rate and behind sockets", "[rehearsal]") {
  Folder folder;
  RealBench b{described(folder.path)};
  CHECK(text_of(folder.path + "/endpoints")
            .find("input meter\tserial\t" + folder.path + "/input-meter\t19200\n") != std::string::npos);
  b.play([](RealBench& r) -> link::Wait {
    const auto source = co_await tcp(*r.clock, r.at("source"));
    expect(co_await ask(*r.clock, *source, "*IDN?"), "north bench,source,S-001,1.0");
    expect(co_await ask(*r.clock, *source, "OUTP ON;OUTP?"), "1");
    auto meter = co_await serial(*r.clock, r.at("input meter").path, 19200);
    expect(co_await ask(*r.clock, *meter, "*IDN?"), "north bench,meter,M-001,1.0");
    const std::string reply = co_await ask(*r.clock, *meter, "MEAS:VOLT:DC?");
    CHECK(base::parse_number(reply).has_value());
    // The cable is pulled at our side and plugged in again: the pty is still there.
    meter->close();
    meter = co_await serial(*r.clock, r.at("input meter").path, 19200);
    expect(co_await ask(*r.clock, *meter, "*IDN?"), "north bench,meter,M-001,1.0");
    // At another rate nothing that comes back is a reply.
    meter->close();
    meter = co_await serial(*r.clock, r.at("input meter").path, 9600);
    const std::string garbled = co_await ask(*r.clock, *meter, "*IDN?", 0.2);
    CHECK(garbled.find("north") == std::string::npos);
    const auto reader = co_await serial(*r.clock, r.at("thermocouples").path, 9600);
    const std::string line = co_await ask(*r.clock, *reader, "");
    CHECK(line.substr(0, 3) == "T1 ");
    CHECK(line.substr(line.size() - 2) == " C");
  });
  CHECK_FALSE(fs::exists(fs::symlink_status(folder.path + "/input-meter")));
  CHECK_FALSE(fs::exists(folder.path + "/control"));
}

TEST_CASE("a pty that vanishes ends the link and comes back under its name", "[rehearsal]") {
  Folder folder;
  BenchDescription d = described(folder.path);
  d.faults = {{"input meter", FaultKind::vanish, {}, 2, 1.0, 1, 0.0},
              {"source", FaultKind::vanish, {}, 2, 1.0, 1, 0.0}};
  RealBench b{d};
  b.play([](RealBench& r) -> link::Wait {
    auto meter = co_await serial(*r.clock, r.at("input meter").path, 19200);
    expect(co_await ask(*r.clock, *meter, "*IDN?"), "north bench,meter,M-001,1.0");
    expect(co_await ask(*r.clock, *meter, "*IDN?"), "(closed)");
    auto gone = co_await link::open_serial(*r.clock, port(r.at("input meter").path, 19200));
    CHECK_FALSE(gone.ok());
    auto source = co_await tcp(*r.clock, r.at("source"));
    expect(co_await ask(*r.clock, *source, "*IDN?"), "north bench,source,S-001,1.0");
    expect(co_await ask(*r.clock, *source, "*IDN?"), "(closed)");
    auto refused = co_await link::open_tcp(*r.clock, host(r.at("source").port));
    CHECK_FALSE(refused.ok());
    co_await r.clock->sleep_for(std::chrono::milliseconds{1300});
    meter = co_await serial(*r.clock, r.at("input meter").path, 19200);
    expect(co_await ask(*r.clock, *meter, "*IDN?"), "north bench,meter,M-001,1.0");
    source = co_await tcp(*r.clock, r.at("source"));
    expect(co_await ask(*r.clock, *source, "*IDN?"), "north bench,source,S-001,1.0");
  });
}

TEST_CASE("the control socket types, turns, captures, tells the truth and stops", "[rehearsal]") {
  Folder folder;
  RealBench b{described(folder.path)};
  b.play([path = folder.path](RealBench& r) {
    return [](RealBench& real, std::string dir) -> link::Wait {
      const auto executor = co_await net::this_coro::executor;
      const auto line = control(*real.clock, executor, dir + "/control");
      expect(co_await ask(*real.clock, *line, "hand source output 1"), "done");
      expect(co_await ask(*real.clock, *line, "hand lamps 3"), "done");
      expect(co_await ask(*real.clock, *line, "hand lamps 30"), "error lamps: 30 is not possible; 0 to 3");
      const std::string typed = co_await ask(*real.clock, *line, "typed input voltage");
      CHECK(typed.substr(typed.find(' ')) == " V 600 0.1");
      const std::string nobody = co_await ask(*real.clock, *line, "typed output colour");
      CHECK(nobody.substr(0, 6) == "error ");
      const std::string capture = co_await ask(*real.clock, *line, "capture scope");
      CHECK(capture == dir + "/capture_0001.csv");
      CHECK(text_of(capture).substr(0, 16) == "Time,V_out\n(s),(");

      const auto scope = co_await tcp(*real.clock, real.at("scope"));
      expect(co_await ask(*real.clock, *scope, "*TRG;*OPC?"), "1");
      CHECK(fs::exists(dir + "/capture_0002.csv"));

      expect(co_await ask(*real.clock, *line, "fault source silence query=1 count=1"), "done");
      const auto source = co_await tcp(*real.clock, real.at("source"));
      expect(co_await ask(*real.clock, *source, "*IDN?", 0.1), "(none)");
      expect(co_await ask(*real.clock, *source, "*IDN?"), "north bench,source,S-001,1.0");
      const std::string wrong = co_await ask(*real.clock, *line, "fault source tantrum at=1");
      CHECK(wrong.substr(0, 6) == "error ");

      const std::int64_t now = real.clock->now_ns() + real.clock->utc_offset_ns();
      const std::string window = base::print_integer(now - 50'000'000) + " " + base::print_integer(now);
      expect(co_await ask(*real.clock, *line, "window " + window + " 25 \"%\" load"), "done");
      expect(co_await ask(*real.clock, *line, "truth " + dir + "/truth.json"), "done");
      const std::string truth = text_of(dir + "/truth.json");
      CHECK(truth.find("{\"label\": \"25 \\\"%\\\" load\", \"input_power_w\": ") != std::string::npos);
      expect(co_await ask(*real.clock, *line, "stop"), "done");
      co_await real.bench.stopped();
    }(r, path);
  });
  // The log in the file is the log in memory, line for line.
  std::istringstream in{text_of(folder.path + "/log.tsv")};
  std::string text;
  std::size_t count = 0;
  while (std::getline(in, text)) {
    const auto entry = parse_entry(text);
    REQUIRE(entry.ok());
    REQUIRE(count < b.bench.log().size());
    CHECK(print_entry(*entry) == print_entry(b.bench.log()[count]));
    ++count;
  }
  CHECK(count == b.bench.log().size());
  CHECK(count > 5);
}

TEST_CASE("nothing but an older symlink is replaced by a published name", "[rehearsal]") {
  Folder folder;
  std::ofstream{folder.path + "/input-meter"} << "somebody's file";
  net::io_context io;
  const auto clock = link::make_real_clock();
  RehearsedBench bench{io.get_executor(), *clock, described(folder.path)};
  const auto started = bench.start();
  REQUIRE_FALSE(started.ok());
  CHECK(started.refusal().text() == folder.path +
                                        "/input-meter: something that is not a symlink has this name; "
                                        "choose another folder");
  CHECK(text_of(folder.path + "/input-meter") == "somebody's file");
}

TEST_CASE("fault scripts are read, and refused with line and remedy", "[rehearsal]") {
  const auto faults = parse_faults(
      "# a bad day\n\noutput wattmeter silence at=12.5 length=3\nsource late query=40 count=2 delay=1.5\r\n");
  REQUIRE(faults.ok());
  REQUIRE(faults->size() == 2);
  CHECK(faults->at(0).instrument == "output wattmeter");
  CHECK(faults->at(0).kind == FaultKind::silence);
  CHECK(faults->at(0).at_s == 12.5);
  CHECK(faults->at(0).length_s == 3.0);
  CHECK(faults->at(1).at_query == 40);
  CHECK(faults->at(1).count == 2);
  CHECK(faults->at(1).delay_s == 1.5);
  const auto refusal = [](std::string_view text) {
    const auto parsed = parse_faults(text);
    return parsed.ok() ? std::string{} : parsed.refusal().text();
  };
  CHECK(refusal("source silence") == "line 1: INSTRUMENT KIND and at=SECONDS or query=NUMBER are wanted");
  CHECK(refusal("\nsource silence at=x") ==
        "line 2: \"at=x\" is not KEY=NUMBER with a number of zero or more");
  CHECK(refusal("source silence at=1 query=2") ==
        "line 1: one of at=SECONDS and query=NUMBER is wanted, not both");
  CHECK(refusal("source silence when=1") ==
        "line 1: \"when\" is not known; at, length, query, count or delay");
  CHECK(refusal("source silence query=1.5") == "line 1: \"query=1.5\": a whole number from 1 on is wanted");
  CHECK(refusal("source tantrum at=1").substr(0, 46) == "line 1: \"tantrum\" is no kind of fault; silence");
}

TEST_CASE("a line of the log keeps any bytes", "[rehearsal]") {
  std::string bytes;
  for (int i = 0; i < 256; ++i) bytes += static_cast<char>(i);
  const LogEntry entry{-5, 1'700'000'000'123'456'789, "a\tb", "reply", 7, "garbage", bytes, "\\x\\"};
  const std::string line = print_entry(entry);
  CHECK(line.find('\n') == std::string::npos);
  const auto back = parse_entry(line);
  REQUIRE(back.ok());
  CHECK(back->query == bytes);
  CHECK(back->reply == entry.reply);
  CHECK(back->instrument == entry.instrument);
  CHECK(back->sent_ns == -5);
  CHECK(print_entry(*back) == line);
  for (const char* wrong : {"", "1\t2\t3", "x\t2\ta\treply\t1\t\tq\tr", "1\t2\ta\treply\t1\t\tq\t\\q",
                            "1\t2\ta\treply\t1\t\tq\t\\x1"})
    CHECK_FALSE(parse_entry(wrong).ok());
}

}  // namespace
}  // namespace loadstair::rehearsal
