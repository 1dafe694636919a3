// setup: the files a person writes - hook-up (what is connected, and how), stair (what to do), profiles (how
// an instrument speaks) - read into plain data, checked, explained. Not for talking to anything.
#pragma once

#include <map>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"
#include "drivers/instrument/profile.h"

namespace loadstair::setup {

/// How an instrument is reached. A folder is where a scope drops its CSV files.
enum class LinkKind { serial, tcp, folder };
struct LinkChoice {
  LinkKind kind = LinkKind::serial;
  std::string path;  ///< serial: device or pty; folder: the folder. Relative to the hook-up file's folder
  int baud = 9600;
  int data_bits = 8;
  std::string parity = "none";  ///< none, even, odd
  int stop_bits = 1;
  std::string host;  ///< tcp
  int port = 0;
};

/// Whether the instrument's own ground or its shield ties to earth.
enum class Isolation { unknown, isolated, battery, earthed };

struct Instrument {
  std::string name;
  std::string profile_name;
  /// Resolved: built in, or a file beside the hook-up file. Of its queries only those that a channel needs
  /// are kept.
  instrument::Profile profile;
  LinkChoice link;
  std::string identity;  ///< what the identity reply must begin with; empty: any
  Isolation isolation = Isolation::unknown;
  double poll_s = 1.0;
  double update_s = 0.0;  ///< the meter's update period; 0: answers with a fresh conversion
  double integration_s = 0.0;
  double delay_s = 0.0;  ///< from the middle of the conversion to the reply, beyond half the integration
  std::string serial_number;
  std::string calibrated;  ///< ISO 8601 dates, for the report
  std::string calibration_due;
};

/// Where a specification holds. What is not declared is not checked; outside of what is declared a reading is
/// flagged, and its contribution grows only where the file says how.
struct Conditions {
  std::optional<double> low_c, high_c;  ///< ambient span of the specification, degC
  /// Beyond the span, per kelvin: this share of the specification is added to it.
  std::optional<double> percent_of_spec_per_k;
  std::optional<double> days;                    ///< since calibration, within which the figures hold
  std::optional<double> least_percent_of_range;  ///< readings below are outside the specification
  std::optional<double> least_hz;                ///< lower end of the band; its upper end is band_hz
  std::optional<double> least_power_factor;      ///< wattmeters
};

/// Accuracy of one range, as the meter's book states it: +-(a % of reading + b % of range + c digits).
struct RangeSpec {
  double upto = 0.0;  ///< full scale, in the meter's own unit (before conversion)
  double reading_percent = 0.0;
  double range_percent = 0.0;
  double digits = 0.0;
  double resolution = 0.0;  ///< weight of the last digit
  /// Voltmeter, also one on a shunt: across its terminals; ammeter: burden with fuse. 0: not declared
  double impedance_ohm = 0.0;
  std::optional<double> impedance_tolerance_percent;
};

enum class Quantity { voltage, current, power, apparent_power, power_factor, frequency, temperature };
enum class Response { dc, true_rms_ac, true_rms_ac_dc, average_responding, wattmeter };

struct Shunt {
  double resistance_ohm = 0.0;
  double tolerance_percent = 0.0;
  double tempco_ppm_per_k = 0.0;
  double rise_k_per_w = 0.0;                  ///< self-heating
  std::optional<double> ambient_c;            ///< around the shunt; nullopt: 23 degC
  std::optional<double> ambient_tolerance_k;  ///< half-width; nullopt: 2 K (common practice, no source)
};
struct Thermocouple {
  char letter = 'K';
  int tolerance_class = 2;    ///< IEC 60584-1
  std::string cold_junction;  ///< name of a temperature channel; empty: the reader compensates, value is degC
};
/// A platinum thermometer read as resistance. IEC 60751.
struct Platinum {
  double r0_ohm = 100.0;
  std::string tolerance_class = "B";  ///< AA, A, B, C
  bool film = true;                   ///< else wire-wound
  double lead_ohm = 0.0;              ///< both leads of a two-wire connection; 0: three or four wires
};
/// A thermistor read as resistance: by beta and the resistance at 25 degC, or by Steinhart and Hart's three.
struct Thermistor {
  double r25_ohm = 0.0, beta_k = 0.0;
  double a = 0.0, b = 0.0, c = 0.0;   ///< used where r25_ohm is 0
  std::optional<double> tolerance_k;  ///< half-width in K; nullopt: uncertainty not known
};
/// From what the meter says to the quantity: value * scale, then at most one of the four.
struct Conversion {
  double scale = 1.0;
  double scale_tolerance_percent = 0.0;
  std::optional<Shunt> shunt;
  std::optional<Thermocouple> thermocouple;
  std::optional<Platinum> platinum;
  std::optional<Thermistor> thermistor;
};

struct Channel {
  std::string name;
  bool typed = false;
  std::string instrument;  ///< linked channels: name of an instrument ...
  std::string value;       ///< ... and which of its profile's values
  Quantity quantity = Quantity::voltage;
  std::string unit;  ///< of the quantity after conversion: V, A, W, VA, 1, Hz, degC
  Response response = Response::dc;
  Conversion conversion;
  std::vector<RangeSpec> ranges;  ///< ascending; empty: accuracy not declared ("uncertainty not known")
  std::optional<double> band_hz;  ///< upper end of the meter's declared band
  std::optional<double> crest_limit;
  std::optional<double> low, high;  ///< plausible values, for typed entries
  Conditions conditions;
  /// Of a wattmeter's power: half-width of the phase error between its voltage and its current circuit.
  std::optional<double> phase_error_deg;
  /// Typed channels: which meter on the bench it is; the same text in two channels is one meter. Empty: its
  /// own, named like the channel.
  std::string meter;
};

enum class Direction { input, output };
enum class PortKind { dc, ac };
/// Where the voltmeter's wires are, seen from the ammeter.
enum class VoltmeterSide { converter, outer };

struct Port {
  std::string name;
  Direction direction = Direction::input;
  PortKind kind = PortKind::dc;
  bool counted = true;  ///< auxiliary supplies: counted in the efficiency or not
  std::string voltage, current, power, power_factor;  ///< channel names; empty: none
  std::optional<double> power_factor_low;             ///< declared as [low, 1]
  VoltmeterSide voltmeter = VoltmeterSide::converter;
  std::optional<bool>
      sensed;  ///< voltage taken at the converter's terminals by separate wires; nullopt: not declared
  std::optional<double> lead_resistance_ohm;  ///< inside the reference plane, both leads together
  double lead_tolerance_percent = 30.0;
  std::optional<double> ripple_current_rms_a;
  std::optional<double> source_resistance_ohm;
  bool live = false;  ///< at a dangerous voltage to earth (isolation is checked against it)
};

/// An instrument that sets something.
struct Control {
  std::string name;  ///< "source", "load", "converter"
  std::string instrument;
  std::string role;  ///< source, load, converter: decides the safe order
  std::vector<std::pair<std::string, double>>
      at_start;  ///< settings applied before switch-on (limits, voltage)
};

/// Lamps and resistors at hand.
struct BankItem {
  std::string name;
  std::string kind;      ///< lamp, resistor
  double power_w = 0.0;  ///< at rated voltage
  double voltage_v = 0.0;
  double cold_ratio = 1.0;  ///< cold over hot resistance
  int count = 1;
};

/// Where a scope's captures come from, and what their columns are.
struct CaptureSource {
  std::string instrument;                      ///< with a folder link
  std::string voltage_column, current_column;  ///< header name or number from 1
  double voltage_scale = 1.0, current_scale = 1.0;
  double voltage_gain_percent = 0.0, current_gain_percent = 0.0;  ///< tolerance; 0: not declared
  double voltage_offset_v = 0.0, current_offset_a = 0.0;  ///< half-widths of the zero; 0: not declared
  /// -3 dB, first order; nullopt: not declared. Known to 30 % (common practice, no source).
  std::optional<double> voltage_bandwidth_hz, current_bandwidth_hz;
  double voltage_linearity_percent = 0.0, current_linearity_percent = 0.0;  ///< of the record's peak to peak
  double current_delay_s = 0.0;      ///< how late the current comes, as measured on a resistive signal
  double delay_tolerance_s = 0.0;    ///< half-width of what is left between the two channels
  std::string deskewed;              ///< ISO 8601 date of that measurement
  double phase_tolerance_deg = 0.0;  ///< half-width at the fundamental beside the delay (a current probe's)
  double timebase_ppm = 0.0;         ///< half-width of the sampling rate; 0: not declared
  std::optional<double> crest_band_hz;  ///< band in which the crest factor is quoted
  std::string port;                     ///< the port that these columns belong to
};

struct TemperaturePoint {
  std::string channel;
  std::string place;            ///< "heatsink"
  std::string ambient_channel;  ///< to subtract; empty: none
};

/// Simulated counterpart of the bench, for `rehearse` and `demo`: numbers by section. Where the meters sit,
/// what they measure and how exact they are is taken from the rest of the file. Allowed keys, all optional:
///   converter  no_load_w linear quadratic_per_w resistance_rise_per_k standby_w output_voltage_v
///              output_impedance_ohm soft_start_s sense_threshold_v sense_ohm fold_back least_input_voltage_v
///   source     voltage_v resistance_ohm current_limit_a lead_ohm
///   load       lead_ohm greatest_current_a
///   thermal    ambient_c ambient_drift_k_per_h junction_to_case_k_per_w case_to_air_k_per_w
///   case_to_air_fan_k_per_w
///              junction_time_s case_time_s fan_starts_c fan_stops_c fan_power_w
///   waveform   frequency_hz dc_offset_v third_share fifth_share seventh_share residue_share residue_ratio
///   ripple_share meters     noise_share (standard deviation of one conversion over full scale) person look_s
///   type_s (from question to reading the display, from there to the answer)
struct RehearsalSection {
  std::string kind = "inverter";  ///< inverter, dcdc
  std::string sense = "peak";     ///< what the overload circuit looks at: peak, rms, average
  std::map<std::string, double> converter, source, load, thermal, waveform, meters, person;
};

struct Hookup {
  std::map<std::string, std::string> kept_profiles;  ///< texts by name that a record kept; they come first
  std::string file;                                  ///< as given, for messages
  std::string text;                                  ///< the whole file, for the record
  std::string bench;
  std::vector<Instrument> instruments;
  std::vector<Channel> channels;
  std::vector<Port> ports;
  std::vector<Control> controls;
  std::vector<BankItem> loads;
  std::vector<TemperaturePoint> temperatures;
  std::vector<CaptureSource> captures;
  std::map<std::string, double> repeatability_percent;  ///< by channel: declared 24-hour figures
  std::optional<RehearsalSection> rehearsal;

  [[nodiscard]] const Channel* find_channel(std::string_view name) const;
  [[nodiscard]] const Instrument* find_instrument(std::string_view name) const;
  [[nodiscard]] const Port* find_port(std::string_view name) const;
};

/// Reads a hook-up file's text. `file` is used in messages and to find profiles beside it.
/// Refusal: place "FILE:line:column", reason with what would be right; the first problem only.
[[nodiscard]] base::Outcome<Hookup> read_hookup(std::string_view text, const std::string& file);
/// The same for a text out of a record: profiles come from `profiles` (text by name), not from today's files.
[[nodiscard]] base::Outcome<Hookup> read_hookup(std::string_view text, const std::string& file,
                                                const std::map<std::string, std::string>& profiles);
[[nodiscard]] base::Outcome<Hookup> load_hookup(const std::string& file);

/// A path that stands in a file, as the program may open it: relative ones are relative to the file's folder.
[[nodiscard]] std::string beside(const std::string& file, const std::string& path);

}  // namespace loadstair::setup
