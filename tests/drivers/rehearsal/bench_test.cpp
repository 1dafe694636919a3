#include "drivers/rehearsal/bench.h"

#include <algorithm>
#include <boost/asio/io_context.hpp>
#include <catch2/catch.hpp>
#include <cmath>
#include <cstdlib>
#include <ctime>

#include "analysis/base/number.h"
#include "drivers/link/task_scope.h"
#include "drivers/rehearsal/draws.h"

namespace loadstair::rehearsal {
namespace {

namespace net = boost::asio;

constexpr std::int64_t kSecond_ns = 1'000'000'000;

void rethrow(const std::exception_ptr& failure) {
  std::rethrow_exception(failure);
}

MeterFunction function(std::string name, Quantity quantity, Port port, std::vector<MeterRange> ranges) {
  MeterFunction f;
  f.name = std::move(name);
  f.quantity = quantity;
  f.port = port;
  f.ranges = std::move(ranges);
  f.response = port == Port::output ? Response::true_rms_ac_dc : Response::dc;
  return f;
}

InstrumentDescription wattmeter() {
  InstrumentDescription d;
  d.name = "output wattmeter";
  d.baud = 19200;
  d.identity = "north bench,wattmeter,W-001,1.0";
  d.meter.update_period_s = 0.25;
  d.meter.integration_s = 0.2;
  d.meter.functions = {
      function("voltage", Quantity::voltage, Port::output, {{300.0, 0.01, 0.1, 0.05, 0.0, 0.0}}),
      function("current", Quantity::current, Port::output, {{5.0, 0.0001, 0.1, 0.05, 0.0, 0.01}}),
      function("power", Quantity::power, Port::output, {{1500.0, 0.01, 0.1, 0.05, 0.0, 0.0}})};
  d.queries = {{"MEAS?", {"voltage", "current", "power"}}};
  return d;
}

InstrumentDescription source() {
  InstrumentDescription d;
  d.name = "source";
  d.paced = false;
  d.identity = "north bench,source,S-001,1.0";
  d.settings = {{"VOLT {value}", "VOLT?", Knob::source_voltage, 0.0, 400.0},
                {"OUTP {value}", "OUTP?", Knob::source_output, 0.0, 1.0},
                {"CURR:LIM {value}", "CURR:LIM?", Knob::none, 0.0, 10.0}};
  return d;
}

InstrumentDescription load() {
  InstrumentDescription d;
  d.name = "load";
  d.paced = false;
  d.identity = "north bench,load,L-001,1.0";
  d.settings = {{"POW {value}", "POW?", Knob::load_power, 0.0, 750.0},
                {"INP {value}", "INP?", Knob::load_input, 0.0, 1.0}};
  return d;
}

InstrumentDescription shunt_meter() {
  InstrumentDescription d;
  d.name = "shunt meter";
  d.service = Service::text_lines;
  d.baud = 9600;
  d.meter.update_period_s = 0.5;
  d.meter.integration_s = 0.4;
  MeterFunction f = function("reading", Quantity::current, Port::input, {{0.6, 1e-5, 0.1, 0.0, 3.0, 0.0}});
  f.shunt = Shunt{0.1, 0.1};
  d.meter.functions = {f};
  d.lines = {{{"", "reading", 1e-3, " mV DC", 1.0, " V AC"}}};
  return d;
}

BenchDescription north_bench() {
  BenchDescription d;
  d.instruments = {wattmeter(), source(), load(), shunt_meter()};
  InstrumentDescription hand_held;
  hand_held.name = "hand-held";
  hand_held.service = Service::display;
  hand_held.link = LinkKind::none;
  hand_held.meter.update_period_s = 0.4;
  hand_held.meter.integration_s = 0.3;
  hand_held.meter.functions = {
      function("reading", Quantity::voltage, Port::input, {{600.0, 0.1, 0.5, 0.0, 2.0, 0.0}})};
  d.instruments.push_back(hand_held);
  d.typed = {{"input voltage", "hand-held", "reading", "V", 1.0, 0.6, 1.4}};
  d.plant.lamps.count = 4;
  return d;
}

/// Virtual time, one person's script at the daemon's side.
struct VirtualBench {
  explicit VirtualBench(BenchDescription description = north_bench())
      : bench{io.get_executor(), *clock, std::move(description)} {
    const auto started = bench.start();
    REQUIRE(started.ok());
  }
  ~VirtualBench() {
    tasks.spawn(bench.close());
    clock->run(clock->now_ns() + 60 * kSecond_ns);
  }
  VirtualBench(const VirtualBench&) = delete;
  VirtualBench& operator=(const VirtualBench&) = delete;

  std::unique_ptr<link::Link> open(const std::string& instrument) {
    std::unique_ptr<link::Link> opened;
    tasks.spawn([](link::Opener opener, std::unique_ptr<link::Link>& out) -> link::Wait {
      auto outcome = co_await opener();
      if (outcome) out = std::move(outcome.value());
    }(bench.opener_for(instrument), opened));
    run(0.0);
    return opened;
  }
  /// Sends and waits up to `limit_s` for one line; "(none)" without one.
  std::string ask(link::Link& link, const std::string& text, double limit_s = 1.0) {
    std::string reply = "(none)";
    tasks.spawn([](link::Clock& time, link::Link& to, std::string message, double limit,
                   std::string& out) -> link::Wait {
      const std::int64_t deadline = time.now_ns() + static_cast<std::int64_t>(limit * 1e9);
      if (!message.empty()) {
        const link::Status sent = co_await to.write(message + "\n", deadline);
        if (sent != link::Status::done) co_return;
      }
      const link::Received received = co_await to.read_line("\n", deadline);
      if (received.status == link::Status::done) out = received.bytes;
    }(*clock, link, text, limit_s, reply));
    run(limit_s + 0.001);
    return reply;
  }
  void tell(link::Link& link, const std::string& text) { CHECK(ask(link, text, 0.1) == "(none)"); }
  /// Sends, whatever comes back.
  void tell_any(link::Link& link, const std::string& text) { (void)ask(link, text, 0.02); }
  void run(double length_s) { clock->run(clock->now_ns() + static_cast<std::int64_t>(length_s * 1e9)); }

  net::io_context io;
  std::unique_ptr<link::VirtualClock> clock = link::VirtualClock::make(io, 1'700'000'000 * kSecond_ns);
  link::TaskScope tasks{io.get_executor(), rethrow};
  RehearsedBench bench;
};

std::vector<double> numbers(const std::string& reply) {
  std::vector<double> out;
  std::size_t from = 0;
  while (from <= reply.size()) {
    const std::size_t comma = std::min(reply.find(',', from), reply.size());
    const auto value = base::parse_number(reply.substr(from, comma - from));
    out.push_back(value.value_or(std::nan("")));
    from = comma + 1;
  }
  return out;
}

const LogEntry* last_of(const std::vector<LogEntry>& log, const std::string& kind) {
  const LogEntry* found = nullptr;
  for (const LogEntry& entry : log)
    if (entry.kind == kind) found = &entry;
  return found;
}

TEST_CASE("a conversation in SCPI sets the plant going and reads it", "[rehearsal]") {
  VirtualBench b;
  const auto source = b.open("source");
  const auto load = b.open("load");
  const auto meter = b.open("output wattmeter");
  REQUIRE((source && load && meter));
  CHECK(b.ask(*source, "*IDN?") == "north bench,source,S-001,1.0");
  b.tell(*source, "VOLT 380;OUTP ON");
  CHECK(b.ask(*source, "outp?") == "1");
  CHECK(b.ask(*source, "VOLT?;OUTP?") == "+3.80000E+02;1");
  b.tell(*source, "CURR:LIM 4");
  CHECK(b.ask(*source, "CURR:LIM?") == "+4.00000E+00");
  b.run(2.0);
  b.tell(*load, "POW 300");
  b.tell(*load, "INP ON");
  b.run(3.0);
  const std::vector<double> values = numbers(b.ask(*meter, "MEAS?"));
  REQUIRE(values.size() == 3);
  // Inside the declared specification of each function: 0.1 % of reading, 0.05 % of range, half the last
  // digit.
  const PortStep& out = b.bench.plant().last().output;
  const auto within = [](double shown, double truth, double range, double digit) {
    return std::abs(shown - truth) <= 0.001 * truth + 0.0005 * range + 0.5 * digit;
  };
  CHECK(within(values[0], std::sqrt(out.voltage[1].mean_square), 300.0, 0.01));
  CHECK(within(values[1], std::sqrt(out.meter_current.mean_square), 5.0, 0.0001));
  CHECK(within(values[2], out.meter_power_w[1], 1500.0, 0.01));
  CHECK(out.power_w == Approx(300.0).epsilon(0.002));
}

TEST_CASE("what an instrument does not know goes into its error queue", "[rehearsal]") {
  VirtualBench b;
  const auto source = b.open("source");
  CHECK(b.ask(*source, "SYST:ERR?") == "0,\"No error\"");
  CHECK(b.ask(*source, "MEAS:NOTHING?", 0.2) == "(none)");
  b.tell(*source, "VOLT 9999");
  b.tell(*source, "VOLT abc");
  b.tell(*source, "VOLTAGE 10");
  CHECK(b.ask(*source, "SYST:ERR?") == "-113,\"Undefined header\"");
  CHECK(b.ask(*source, "SYST:ERR?") == "-222,\"Data out of range\"");
  CHECK(b.ask(*source, "SYST:ERR?") == "-104,\"Data type error\"");
  CHECK(b.ask(*source, "SYST:ERR?") == "-113,\"Undefined header\"");
  CHECK(b.ask(*source, "SYST:ERR?") == "0,\"No error\"");
  CHECK(b.ask(*source, "VOLT?") == "+3.85000E+02");
  // Foreign bytes are an undefined header, never more.
  b.tell(*source, std::string("\x00\xff;;;\"", 6));
  b.tell(*source, std::string(70000, 'x'));
  CHECK(b.ask(*source, "*IDN?") == "north bench,source,S-001,1.0");
  b.tell(*source, "OUTP 1");
  b.tell(*source, "*RST");
  CHECK(b.ask(*source, "OUTP?") == "0");
}

TEST_CASE("random bytes never silence an instrument", "[rehearsal]") {
  const char* given = std::getenv("LOADSTAIR_TEST_SEED");
  const auto seed =
      static_cast<std::uint64_t>(base::parse_integer(given != nullptr ? given : "1").value_or(1));
  INFO("LOADSTAIR_TEST_SEED=" << seed);
  Pcg32 draw{seed, 11};
  VirtualBench b;
  const auto source = b.open("source");
  const std::vector<std::string> scraps = {"VOLT", "VOLT ", "VOLT?", "OUTP", "{value}", "*", "?",
                                           ";",    "\"",    " ",     "ON",   "1e999",   "\r"};
  for (int message = 0; message < 200; ++message) {
    std::string bytes;
    for (std::uint32_t i = draw.next() % 8; i > 0; --i) {
      bytes += scraps[draw.next() % scraps.size()];
      if (draw.next() % 3 == 0) bytes += static_cast<char>(draw.next() & 0xffU);
    }
    b.tell_any(*source, bytes);
  }
  source->drain();
  CHECK(b.ask(*source, "*IDN?") == "north bench,source,S-001,1.0");
}

TEST_CASE("bytes are paced to the declared rate", "[rehearsal]") {
  VirtualBench b;
  const auto meter = b.open("output wattmeter");
  link::Received received;
  const std::int64_t before = b.clock->now_ns();
  b.tasks.spawn([](link::Link& link, link::Received& out) -> link::Wait {
    const link::Status sent = co_await link.write("MEAS?\n", INT64_MAX);
    if (sent == link::Status::done) out = co_await link.read_line("\n", INT64_MAX);
  }(*meter, received));
  b.run(1.0);
  REQUIRE(received.status == link::Status::done);
  // 6 bytes there, 5 ms of thought, then the reply: ten bits a byte at 19200 baud.
  const double byte_s = 10.0 / 19200.0;
  const auto size = static_cast<double>(received.bytes.size());
  CHECK(1e-9 * static_cast<double>(received.first_ns - before) == Approx(0.005 + 7.0 * byte_s).margin(1e-6));
  CHECK(1e-9 * static_cast<double>(received.last_ns - before) ==
        Approx(0.005 + (7.0 + size) * byte_s).margin(1e-6));
}

TEST_CASE("a text-line meter prints each conversion, and the shunt's millivolts are the current",
          "[rehearsal]") {
  VirtualBench b;
  REQUIRE(b.bench.perform("source output 1").ok());
  REQUIRE(b.bench.perform("lamps 4").ok());
  b.run(5.0);
  const auto meter = b.open("shunt meter");
  std::vector<double> values;
  for (int i = 0; i < 4; ++i) {
    const std::string line = b.ask(*meter, "", 1.0);
    REQUIRE(line.size() > 6);
    CHECK(line.substr(line.size() - 6) == " mV DC");
    values.push_back(base::parse_number(line.substr(0, line.size() - 6)).value_or(-1.0));
  }
  const double current = b.bench.plant().last().input.meter_current.mean;
  CHECK(current > 1.0);  // about 400 W of lamps
  // 0.1 % shunt, 0.1 % + 3 digits of 0.01 mV.
  for (const double value : values)
    CHECK(value == Approx(100.0 * current).margin(0.002 * 100.0 * current + 0.03));
  // One line for each half second, whoever waits.
  const auto lines = std::count_if(b.bench.log().begin(), b.bench.log().end(),
                                   [](const LogEntry& e) { return e.kind == "line"; });
  CHECK(lines >= 7);
  CHECK(lines <= 9);
}

TEST_CASE("a person reads a display, and hands turn knobs", "[rehearsal]") {
  VirtualBench b;
  REQUIRE(b.bench.perform("source output 1").ok());
  b.run(3.0);
  std::optional<base::Outcome<TypedAnswer>> answer;
  const std::int64_t asked = b.clock->now_ns();
  std::int64_t answered = 0;
  b.tasks.spawn([](RehearsedBench& bench, link::Clock& clock, std::optional<base::Outcome<TypedAnswer>>& out,
                   std::int64_t& at) -> link::Wait {
    out = co_await bench.typed_answer("input voltage");
    at = clock.now_ns();
  }(b.bench, *b.clock, answer, answered));
  b.run(3.0);
  REQUIRE((answer && answer->ok()));
  const TypedAnswer& typed = answer->value();
  CHECK(typed.unit == "V");
  CHECK(typed.range == "600");
  CHECK(typed.digit == "0.1");
  CHECK(typed.value.find('.') == typed.value.size() - 2);
  const auto value = base::parse_number(typed.value);
  REQUIRE(value);
  CHECK(*value == Approx(385.0).margin(0.005 * 385.0 + 0.2));
  CHECK(typed.read_ns == asked + 600'000'000);
  CHECK(answered == asked + 2 * kSecond_ns);

  CHECK(b.bench.perform("lamps 3").ok());
  CHECK(b.bench.plant().settings.lamps_on == 3);
  for (const char* wrong : {"lamps 5", "lamps 1.5", "lamps", "moon 1", "source output 2", "load power -3"})
    CHECK_FALSE(b.bench.perform(wrong).ok());
}

TEST_CASE("each fault does what it says, once, and stands in the log", "[rehearsal]") {
  struct Case {
    FaultKind kind;
    std::string expected;  // reply, "(none)", or "" when only different from the good one
  };
  for (const Case& c :
       {Case{FaultKind::silence, "(none)"}, Case{FaultKind::overload, "9.9E+37,9.9E+37,9.9E+37"},
        Case{FaultKind::garbage, ""}, Case{FaultKind::truncated, ""}, Case{FaultKind::late, "(none)"},
        Case{FaultKind::unit_change, ""}}) {
    INFO("fault " << name_of(c.kind));
    BenchDescription description = north_bench();
    Fault fault;
    fault.instrument = "output wattmeter";
    fault.kind = c.kind;
    fault.at_query = 3;
    fault.delay_s = 1.5;
    description.faults = {fault};
    VirtualBench b{description};
    const auto meter = b.open("output wattmeter");
    CHECK(b.ask(*meter, "*IDN?") == "north bench,wattmeter,W-001,1.0");
    const std::string good = b.ask(*meter, "MEAS?");
    const std::string bad = b.ask(*meter, "MEAS?");
    CHECK(bad != good);
    if (!c.expected.empty()) CHECK(bad == c.expected);
    const auto entry = std::find_if(b.bench.log().begin(), b.bench.log().end(),
                                    [&](const LogEntry& e) { return e.fault == name_of(c.kind); });
    if (c.kind == FaultKind::late) {
      // The line comes after all, to whoever listens then.
      CHECK(b.ask(*meter, "", 1.0) != "(none)");
    } else {
      REQUIRE(entry != b.bench.log().end());
      CHECK(entry->number == 3);
      CHECK(entry->query == "MEAS?");
      if (bad != "(none)") CHECK(entry->reply == bad);
    }
    CHECK(numbers(b.ask(*meter, "MEAS?")).size() == 3);
    CHECK(last_of(b.bench.log(), "reply")->fault.empty());
  }
}

TEST_CASE("a duplicate comes twice and a stale reply is the one before", "[rehearsal]") {
  BenchDescription description = north_bench();
  description.faults = {{"source", FaultKind::duplicate, {}, 2, 1.0, 1, 2.0},
                        {"source", FaultKind::stale, {}, 4, 1.0, 1, 2.0}};
  VirtualBench b{description};
  const auto source = b.open("source");
  CHECK(b.ask(*source, "*IDN?") == "north bench,source,S-001,1.0");
  CHECK(b.ask(*source, "VOLT?") == "+3.85000E+02");
  CHECK(b.ask(*source, "") == "+3.85000E+02");
  CHECK(b.ask(*source, "OUTP?") == "0");
  CHECK(b.ask(*source, "VOLT?") == "0");
  CHECK(b.ask(*source, "VOLT?") == "+3.85000E+02");
}

TEST_CASE("an instrument vanishes, comes back, and may be another one", "[rehearsal]") {
  BenchDescription description = north_bench();
  Fault gone;
  gone.instrument = "output wattmeter";
  gone.kind = FaultKind::vanish;
  gone.at_s = 5.0;
  gone.length_s = 3.0;
  Fault other = gone;
  other.kind = FaultKind::wrong_identity;
  other.length_s = 6.0;
  description.faults = {gone, other};
  VirtualBench b{description};
  auto meter = b.open("output wattmeter");
  CHECK(b.ask(*meter, "*IDN?") == "north bench,wattmeter,W-001,1.0");
  b.run(5.0);
  CHECK(b.ask(*meter, "*IDN?") == "(none)");
  CHECK_FALSE(b.open("output wattmeter"));
  b.run(3.0);
  meter = b.open("output wattmeter");
  REQUIRE(meter);
  CHECK(b.ask(*meter, "*IDN?") == "somebody else,0,0,0");
  b.run(3.0);
  CHECK(b.ask(*meter, "*IDN?") == "north bench,wattmeter,W-001,1.0");
  const auto count = [&](const std::string& fault) {
    return std::count_if(b.bench.log().begin(), b.bench.log().end(),
                         [&](const LogEntry& e) { return e.fault == fault; });
  };
  CHECK(count("vanish") == 1);
  CHECK(count("wrong_identity") == 1);
}

TEST_CASE("a text-line meter's faults are counted in lines", "[rehearsal]") {
  BenchDescription description = north_bench();
  for (const auto& [kind, line] : {std::pair{FaultKind::silence, 2}, std::pair{FaultKind::unit_change, 3},
                                   std::pair{FaultKind::overload, 4}}) {
    Fault fault;
    fault.instrument = "shunt meter";
    fault.kind = kind;
    fault.at_query = line;
    description.faults.push_back(fault);
  }
  VirtualBench b{description};
  const auto meter = b.open("shunt meter");
  const std::string first = b.ask(*meter, "", 0.9);
  CHECK(first.substr(first.size() - 6) == " mV DC");
  b.run(0.1);
  std::vector<std::string> rest;
  for (int i = 0; i < 2; ++i) rest.push_back(b.ask(*meter, "", 1.1));
  CHECK(rest[0].substr(rest[0].size() - 5) == " V AC");
  CHECK(rest[1] == "OL mV DC");
}

TEST_CASE("truth is told for windows, by label, and only for what has been", "[rehearsal]") {
  VirtualBench b;
  REQUIRE(b.bench.perform("source output 1").ok());
  REQUIRE(b.bench.perform("load power 400").ok());
  REQUIRE(b.bench.perform("load input 1").ok());
  b.run(20.0);
  const auto truth = b.bench.truth_over(10 * kSecond_ns, 15 * kSecond_ns);
  REQUIRE(truth.ok());
  CHECK(truth->output_power_w == Approx(b.bench.plant().last().output.power_w).epsilon(1e-4));
  CHECK(truth->efficiency == Approx(truth->output_power_w / truth->input_power_w).epsilon(1e-15));
  CHECK(truth->efficiency > 0.9);
  CHECK(truth->efficiency < 0.99);
  CHECK_FALSE(b.bench.truth_over(10 * kSecond_ns, 10 * kSecond_ns).ok());
  CHECK_FALSE(b.bench.truth_over(10 * kSecond_ns, 25 * kSecond_ns).ok());
}

TEST_CASE("the same seed is the same bench, however it was asked before", "[rehearsal]") {
  const auto replies = [](std::uint64_t seed, bool nosy) {
    BenchDescription description = north_bench();
    description.seed = seed;
    description.instruments[0].meter.functions[2].noise = 0.5;
    VirtualBench b{description};
    CHECK(b.bench.perform("source output 1").ok());
    CHECK(b.bench.perform("load power 200").ok());
    CHECK(b.bench.perform("load input 1").ok());
    const auto meter = b.open("output wattmeter");
    std::string all;
    for (int i = 0; i < 8; ++i) {
      // A nosy neighbour looks at the plant in between; it must not matter.
      for (int k = 0; k < 10; ++k) {
        b.run(0.0737);
        if (nosy) (void)b.bench.plant();
      }
      all += b.ask(*meter, "MEAS?") + "\n";
    }
    return all;
  };
  CHECK(replies(4, false) == replies(4, true));
  CHECK(replies(4, false) != replies(5, false));
}

TEST_CASE("burden loads the plant: an ammeter's drop and a voltmeter's current", "[rehearsal]") {
  BenchDescription description = north_bench();
  description.instruments[0].meter.functions[0].impedance_ohm = 50e3;
  description.plant.converter.output.impedance_ohm = 0.0;
  description.instruments[0].meter.functions[1].ranges[0].burden_ohm = 2.0;
  VirtualBench b{description};
  REQUIRE(b.bench.perform("source output 1").ok());
  REQUIRE(b.bench.perform("load resistance 1000").ok());
  REQUIRE(b.bench.perform("load input 1").ok());
  b.run(3.0);
  const PlantStep& step = b.bench.plant().last();
  const double v = std::sqrt(step.output.voltage[0].mean_square);
  CHECK(std::sqrt(step.output.meter_current.mean_square) == Approx(v / 1002.0).epsilon(1e-12));
  CHECK(step.output.power_w == Approx(v * v / 1002.0 + v * v / 50e3).epsilon(1e-12));
}

TEST_CASE("descriptions that do not hold together are refused with their place", "[rehearsal]") {
  const auto refusal = [](BenchDescription description) {
    net::io_context io;
    const auto clock = link::VirtualClock::make(io, 0);
    RehearsedBench bench{io.get_executor(), *clock, std::move(description)};
    const auto started = bench.start();
    return started.ok() ? std::string{} : started.refusal().text();
  };
  BenchDescription d = north_bench();
  CHECK(refusal(d).empty());
  d.instruments[0].queries[0].functions.push_back("colour");
  CHECK(refusal(d) ==
        "rehearsed instrument \"output wattmeter\": it has no function \"colour\" that a query or a line "
        "could show");
  d = north_bench();
  d.instruments[1].name = "load";
  CHECK(refusal(d) == "rehearsed instrument \"load\": there are two of this name");
  d = north_bench();
  d.typed[0].instrument = "nobody";
  CHECK(refusal(d) == "typed channel \"input voltage\": there is no instrument \"nobody\"");
  d = north_bench();
  d.instruments[0].link = LinkKind::pty;
  CHECK(refusal(d) ==
        "rehearsed instrument \"output wattmeter\": a pty needs a folder to publish its name in");
  d = north_bench();
  d.faults = {{"nobody", FaultKind::silence, 1.0, {}, 1.0, 1, 2.0}};
  CHECK(refusal(d) == "fault script: there is no instrument \"nobody\"");
}

TEST_CASE("an hour of bench in virtual time is cheap", "[rehearsal]") {
  BenchDescription description = north_bench();
  VirtualBench b{description};
  REQUIRE(b.bench.perform("source output 1").ok());
  REQUIRE(b.bench.perform("lamps 3").ok());
  const auto meter = b.open("shunt meter");
  const std::clock_t before = std::clock();
  b.run(3600.0);
  (void)b.bench.plant();
  const double cost_s = static_cast<double>(std::clock() - before) / CLOCKS_PER_SEC;
  INFO("CPU seconds for an hour: " << cost_s);
  // Measured 0.2 s at -O1; ten times that bounds slow and instrumented builds.
  CHECK(cost_s < 2.0);
}

}  // namespace
}  // namespace loadstair::rehearsal
