// The parts of the stair file's reader. For stair*.cpp only.
#pragma once

#include "daemon/setup/stair.h"
#include "drivers/document/reader.h"

namespace loadstair::setup {

// A day: a longer wait is a slip of the unit.
inline constexpr document::Bounds kWait{0.0, 86400.0, false};
inline constexpr document::Bounds kPositiveWait{0.0, 86400.0, true};

/// What a step and a staircase have in common: prompt, soak, settle, average, capture.
void read_conduct(document::ObjectReader& reader, Step& step);

/// The list "set".
void read_set_points(document::ObjectReader& reader, Step& step);

/// Expands the short form: for each input voltage (outer), for each level, one step. Ratings must have been
/// read.
void read_staircase(document::ObjectReader& reader, Stair& stair);

/// "10 %" a second time is "10 % (2)".
[[nodiscard]] std::string unique_label(const std::string& wanted, const std::vector<Step>& steps);

/// Puts the checks of the bench before and after the levels, which must have been read.
void read_checks(document::ObjectReader& top, Stair& stair);

/// "limits", "decision" and "overload"; the steps must have been read.
void read_limits(document::ObjectReader& top, Stair& stair);

}  // namespace loadstair::setup
