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

/// V for a voltage, degC for a temperature, ...
[[nodiscard]] std::string_view unit_of(Quantity quantity);
[[nodiscard]] std::string_view name_of(Quantity quantity);
[[nodiscard]] std::string_view name_of(Response response);

}  // namespace loadstair::setup
