// rehearsal: a simulated bench (converter, source, loads, meters) behind ptys, sockets or memory links, with
// errors drawn inside the declared specifications, faults by script, its own log, and the plant's truth. Not
// for reading instruments: the two sides of a conversation meet in bytes. Nothing here reaches a result.
#pragma once

#include <boost/asio/any_io_executor.hpp>
#include <cstdint>
#include <memory>
#include <string>
#include <vector>

#include "analysis/base/outcome.h"
#include "drivers/link/clock.h"
#include "drivers/link/link.h"
#include "drivers/rehearsal/faults.h"
#include "drivers/rehearsal/meters.h"
#include "drivers/rehearsal/plant.h"
#include "drivers/rehearsal/reply_log.h"
#include "drivers/rehearsal/scope.h"

namespace loadstair::rehearsal {

enum class Service {
  scpi,        ///< answers queries, takes settings
  text_lines,  ///< prints its lines each update period
  display,     ///< can only be looked at (typed)
};

enum class LinkKind { none, pty, tcp, memory };

/// What can be set on the bench, by a command or by hand.
enum class Knob {
  none,
  source_voltage,
  source_output,  ///< a switch
  converter,      ///< a switch
  load_power,     ///< sets the load's mode too
  load_resistance,
  load_current,
  load_input,  ///< a switch
  lamps,       ///< number lit
  resistors,   ///< number switched on
};
/// By name: "source voltage", "lamps", ...; nullopt for anything else.
[[nodiscard]] std::optional<Knob> knob_named(std::string_view name);
[[nodiscard]] std::string_view name_of(Knob knob);

/// A query and the functions of the instrument's meter whose values its reply holds, in order, comma
/// separated.
struct ScpiQuery {
  std::string text;                    ///< "MEAS?"; compared without regard to case
  std::vector<std::string> functions;  ///< MeterFunction names; "" gives a field of zero
};

/// A command that turns a knob. Out of [low, high]: not done, -222 in the error queue.
struct ScpiSetting {
  std::string command;     ///< "VOLT {value}"; a switch takes ON, OFF, 1 and 0
  std::string query;       ///< "VOLT?"; empty: cannot be read back
  Knob knob = Knob::none;  ///< none: kept and read back, without effect (a limit of its own, a display mode)
  double low = 0.0;
  double high = 1e9;
};

/// One value in a printed line: `before`, the value in units of `scale`, `after`.
struct LineField {
  std::string before;
  std::string function;       ///< MeterFunction name
  double scale = 1.0;         ///< 1e-3 prints millivolts
  std::string after;          ///< " mV DC"
  double turned_scale = 1.0;  ///< after a unit_change fault
  std::string turned_after;   ///< " V AC"
};

struct InstrumentDescription {
  std::string name;
  Service service = Service::scpi;
  LinkKind link = LinkKind::memory;
  int baud = 9600;       ///< pty: bytes are paced to it, and garbled when the other side differs
  bool paced = true;     ///< memory links: pace to `baud` too (never TCP)
  std::string identity;  ///< reply to *IDN?
  std::string terminator = "\n";
  double reply_delay_s = 0.005;
  MeterDescription meter;  ///< no functions: not a meter
  std::vector<ScpiQuery> queries;
  std::vector<ScpiSetting> settings;
  std::string overload_reply = "9.9E+37";  ///< SCPI-1999 7.2.1.5; text lines print overload_word
  std::string overload_word = "OL";
  std::string function_query;                 ///< "FUNC?"; empty: none
  std::string function_reply;                 ///< "VOLT:DC"
  std::string turned_reply;                   ///< "VOLT:AC", after a unit_change fault
  std::vector<std::vector<LineField>> lines;  ///< printed one after another each update period
  std::optional<ScopeDescription>
      scope;  ///< with it the instrument takes *TRG (and *OPC? answers when the file is there)
};

/// A channel that a person reads off a display.
struct TypedChannel {
  std::string channel;  ///< the name it is asked by
  std::string instrument;
  std::string function;
  std::string unit = "V";   ///< as the person says it
  double unit_scale = 1.0;  ///< 1e-3 for "mV"
  double look_s = 0.6;      ///< from the question until the display is read
  double type_s = 1.4;      ///< from there until the answer is given
};

/// The name by which a person calls a circuit.
struct NamedCircuit {
  std::string channel;
  std::string instrument;
  std::string function;
};

/// Everything the rehearsal needs; plain data.
struct BenchDescription {
  PlantParameters plant;
  PlantSettings at_start;
  std::vector<InstrumentDescription> instruments;
  std::vector<TypedChannel> typed;
  std::vector<NamedCircuit> circuits;  ///< for changes of the wiring
  std::vector<Fault> faults;
  std::uint64_t seed = 1;       ///< which bench: the fixed share of every error, true shunts, burdens, leads
  std::uint64_t run = 1;        ///< which visit: the run share
  double plant_spread = 0.0;    ///< the loss terms are drawn within +- this share
  double lead_tolerance = 0.0;  ///< so are lead resistances
  std::string folder;           ///< pty names, control socket and list of endpoints; needed for pty and tcp
  std::string log_path;         ///< empty: the log is kept in memory only
};

/// Where an instrument can be reached.
struct Endpoint {
  std::string instrument;
  LinkKind link = LinkKind::none;
  std::string path;  ///< pty: a stable symlink in the folder
  std::string host;  ///< tcp
  int port = 0;
  int baud = 0;
};

/// What a person would type.
struct TypedAnswer {
  std::string value;         ///< "385.1", or "OL"
  std::string unit;          ///< "V"
  std::string range;         ///< "600"
  std::string digit;         ///< "0.1"
  std::int64_t read_ns = 0;  ///< monotonic, when the display was read
};

/// A window whose truth is asked.
struct TruthWindow {
  std::string label;
  std::int64_t from_ns = 0;  ///< UTC
  std::int64_t to_ns = 0;
};

class BenchCore;

/// The bench. One executor, one thread; the executor's context and the clock outlive it.
///
/// Control socket (FOLDER/control, a unix stream socket), one line each way; an answer is `error WHY`
/// otherwise:
///   typed CHANNEL             -> VALUE UNIT RANGE DIGIT
///   hand ACTION               -> done            (see perform)
///   capture INSTRUMENT        -> PATH            (when the file is there)
///   window FROM_NS TO_NS LABEL -> done           (UTC; kept for truth)
///   truth PATH                -> done            (writes the windows given so far)
///   fault SCRIPT LINE         -> done            (see parse_faults; at= counts from now)
///   stop                      -> done            (then the bench closes)
/// FOLDER/endpoints lists `INSTRUMENT<tab>serial<tab>PATH<tab>BAUD` or
/// `INSTRUMENT<tab>tcp<tab>HOST<tab>PORT`, written when everything is open.
class RehearsedBench {
 public:
  RehearsedBench(boost::asio::any_io_executor executor, link::Clock& clock, BenchDescription description);
  ~RehearsedBench();
  RehearsedBench(const RehearsedBench&) = delete;
  RehearsedBench& operator=(const RehearsedBench&) = delete;

  /// Opens every link and starts to serve. Refusals: a description that does not hold together (a query of an
  /// unknown function, a typed channel of an unknown instrument), a pty, socket, folder or log that cannot be
  /// made.
  [[nodiscard]] base::Outcome<void> start();
  /// Ends every conversation and waits for it.
  [[nodiscard]] link::Wait close();
  /// Waits until `stop` came over the control socket, or `close`.
  [[nodiscard]] link::Wait stopped();

  /// For instruments with LinkKind::memory: what the daemon's side opens. Refusal while the instrument has
  /// vanished.
  [[nodiscard]] link::Opener opener_for(const std::string& instrument);
  [[nodiscard]] const std::vector<Endpoint>& endpoints() const;

  /// A person reads a display: waits the reaction time, answers. Refusal: no such channel.
  [[nodiscard]] boost::asio::awaitable<base::Outcome<TypedAnswer>> typed_answer(std::string channel);
  /// A person's hands, one action or several with "; " between them:
  ///   KNOB VALUE            turns a knob: "lamps 3", "converter 0"
  ///   short CHANNEL, ...    shorts the inputs of these circuits; "short inputs": of every voltage, current
  ///   and
  ///                         power circuit
  ///   tie CHANNEL, ...      moves the others to where the first one measures
  ///   restore               every circuit as described
  /// Refusal: no such knob, channel or action, or not possible; the actions before it are done.
  [[nodiscard]] base::Outcome<void> perform(const std::string& action);
  /// Triggers the scope; the file's path when it is there.
  [[nodiscard]] boost::asio::awaitable<base::Outcome<std::string>> capture(std::string instrument);

  void inject(Fault fault);
  [[nodiscard]] const std::vector<LogEntry>& log() const;
  /// True means over a window, monotonic nanoseconds of the clock. Refusal: the window is empty or not yet
  /// over.
  [[nodiscard]] base::Outcome<Truth> truth_over(std::int64_t from_ns, std::int64_t to_ns);
  /// {"steps": [{"label", "input_power_w", "output_power_w", "efficiency", "loss_w", "case_c", ...}]},
  /// atomically.
  [[nodiscard]] base::Outcome<void> write_truth(const std::string& path,
                                                const std::vector<TruthWindow>& windows);
  /// The plant as of now.
  [[nodiscard]] const Plant& plant();

 private:
  std::shared_ptr<BenchCore> core_;
};

}  // namespace loadstair::rehearsal
