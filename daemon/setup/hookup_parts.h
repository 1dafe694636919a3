// The parts of the hook-up file's reader. For hookup*.cpp only.
#pragma once

#include "daemon/setup/hookup.h"
#include "drivers/document/reader.h"

namespace loadstair::setup {

// Each reads one list of the file into the hook-up; what it refers to must have been read before.
void read_instruments(document::ObjectReader& top, Hookup& hookup);
void read_channels(document::ObjectReader& top, Hookup& hookup);
void read_ports(document::ObjectReader& top, Hookup& hookup);
void read_bench_parts(document::ObjectReader& top,
                      Hookup& hookup);  ///< controls, loads, temperatures, captures
void read_rehearsal(document::ObjectReader& top, Hookup& hookup);

/// The channel's "conversion"; refuses two sensors at once.
[[nodiscard]] Conversion read_conversion(document::ObjectReader& channel);
/// Does the conversion lead from the meter's unit to the quantity? Complains otherwise.
void check_conversion(document::ObjectReader& reader, const Channel& channel, std::string_view meter_unit);

/// In which unit the meter must deliver for the conversion to give the quantity, but for a scale that carries
/// a unit of its own.
[[nodiscard]] std::string_view meter_unit_wanted(const Channel& channel);

/// A date under the key, ISO 8601: "2026-03-14"; empty when left out.
[[nodiscard]] std::string read_date(document::ObjectReader& reader, std::string_view key);

/// V for a voltage, degC for a temperature, ...
[[nodiscard]] std::string_view unit_of(Quantity quantity);
[[nodiscard]] std::string_view name_of(Quantity quantity);
[[nodiscard]] std::string_view name_of(Response response);

}  // namespace loadstair::setup
