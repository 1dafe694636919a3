// The parts of the stair file's reader. For stair*.cpp only.
#pragma once

#include "daemon/setup/stair.h"
#include "drivers/document/reader.h"

namespace loadstair::setup {

/// What a step and a staircase have in common: prompt, soak, settle, average, capture.
void read_conduct(document::ObjectReader& reader, Step& step);

/// Expands the short form: for each input voltage (outer), for each level, one step. Ratings must have been
/// read.
void read_staircase(document::ObjectReader& reader, Stair& stair);

}  // namespace loadstair::setup
