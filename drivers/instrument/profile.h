// A profile: how one kind of instrument speaks, without its name. Plain data, filled from a file by
// daemon/setup.
#pragma once

#include <optional>
#include <string>
#include <vector>

namespace loadstair::instrument {

enum class Dialect { scpi, text_lines };

/// A number that the instrument can give.
struct ProfileValue {
  std::string name;          ///< "reading", "voltage", "power", "heatsink"
  std::string unit;          ///< in which the value is stored: "V", "A", "W", "degC", "mV" is stored as V
  std::string line_pattern;  ///< text lines only: see dialect/text_line.h
  bool expected = true;      ///< text lines: its silence is told; false for values that nobody uses
};

/// A query (SCPI) and the values its reply holds, in order; "" skips a field.
struct ProfileQuery {
  std::string text;                 ///< "MEAS:VOLT:DC?"
  std::vector<std::string> values;  ///< names of ProfileValue
};

/// Something that can be set: a load's power, a source's voltage, an output's state.
struct ProfileSetting {
  std::string name;        ///< "power", "voltage", "current", "output"
  std::string unit;        ///< "W"; empty for a switch
  std::string command;     ///< "POW {value}"
  std::string readback;    ///< "POW?"; empty: cannot be read back
  double tolerance = 0.0;  ///< how far the read-back may differ, in the unit
};

/// The commands that make the instrument harmless, in order, and how to see that they worked.
struct ProfileSafe {
  std::vector<std::string> commands;  ///< "OUTP OFF"
  std::string confirm_query;          ///< "OUTP?"
  std::string confirm_reply;          ///< "0"
};

struct Profile {
  std::string name;
  std::string text;  ///< the profile file as it was, for the record
  Dialect dialect = Dialect::scpi;
  std::string terminator = "\n";         ///< of what is sent and what is received
  std::string identity_query = "*IDN?";  ///< empty for text lines
  std::vector<std::string> start_commands;
  std::vector<ProfileValue> values;
  std::vector<ProfileQuery> queries;
  std::string function_query;               ///< "FUNC?": asked once in each round; empty: never
  std::string function_reply;               ///< what it answers while it measures what the queries suppose
  std::vector<std::string> overload_words;  ///< "OL", "----"; beside the special numbers of SCPI-1999
  double overload_at = 9.9e37;              ///< magnitudes from here on are not numbers (SCPI-1999)
  double timeout_s = 1.0;                   ///< for one reply
  std::vector<ProfileSetting> settings;
  std::vector<std::string> on_commands;  ///< what switches the output of a source or the input of a load on
  std::optional<ProfileSafe> safe;
  bool free_running = true;  ///< replies repeat a finished conversion until the next one is ready
};

}  // namespace loadstair::instrument
