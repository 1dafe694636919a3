// Profiles for tests, in the invented scenario.
#pragma once

#include <string>

#include "analysis/base/require.h"
#include "drivers/instrument/profile.h"

namespace loadstair::instrument {

inline Profile scpi_profile() {
  Profile profile;
  profile.name = "test";
  profile.overload_words = {"OL"};
  profile.timeout_s = 0.2;
  return profile;
}

/// meter: one value; turnable: the same, asked for its function; pair: two queries; triple: one query with
/// three values; load: set, switched and made safe; mute load: cannot be read back; line: one value in
/// unasked lines; lines: two channels.
inline Profile test_profile(const std::string& name) {
  auto profile = scpi_profile();
  const ProfileValue voltage{"voltage", "V", {}};
  const ProfileValue current{"current", "A", {}};
  const ProfileValue power{"power", "W", {}};
  if (name == "meter") {
    profile.values = {voltage};
    profile.queries = {{"MEAS:VOLT?", {"voltage"}}};
  } else if (name == "turnable") {
    profile.values = {voltage};
    profile.queries = {{"READ?", {"voltage"}}};
    profile.function_query = "FUNC?";
    profile.function_reply = "VOLT:DC";
  } else if (name == "pair") {
    profile.values = {voltage, current};
    profile.queries = {{"MEAS:VOLT?", {"voltage"}}, {"MEAS:CURR?", {"current"}}};
  } else if (name == "triple") {
    profile.values = {voltage, current, power};
    profile.queries = {{"MEAS?", {"voltage", "", "current", "power"}}};
  } else if (name == "load" || name == "mute load") {
    profile.values = {power};
    profile.queries = {{"MEAS:POW?", {"power"}}};
    profile.start_commands = {"FUNC POW"};
    profile.settings = {{"power", "W", "POW {value}", "POW?", 0.5},
                        {"output", "", "INP {value}", "INP?", 0.0}};
    profile.on_commands = {"INP ON"};
    profile.safe = ProfileSafe{{"INP OFF", "POW 0"}, "INP?", "0"};
    if (name == "mute load") {
      profile.settings[0].readback.clear();
      profile.safe->confirm_query.clear();
    }
  } else if (name == "source") {
    profile.settings = {{"voltage", "V", "VOLT {value}", "VOLT?", 0.1}};
    profile.safe = ProfileSafe{{"OUTP OFF"}, "OUTP?", "0"};
  } else {
    base::require(name == "line" || name == "lines", "a test names a profile that there is");
    profile.dialect = Dialect::text_lines;
    profile.identity_query.clear();
    profile.values = {{"heatsink", "degC", "T1 heatsink {value} {unit}"}};
    if (name == "lines") profile.values.push_back({"ambient", "degC", "T2 ambient {value} {unit}"});
  }
  return profile;
}

}  // namespace loadstair::instrument
