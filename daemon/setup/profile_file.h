// Profiles: how one kind of instrument speaks, as a file. Generic ones are built in; a bench may bring its
// own.
#pragma once

#include <string>
#include <string_view>
#include <vector>

#include "analysis/base/outcome.h"
#include "drivers/instrument/profile.h"

namespace loadstair::setup {

/// Reads a profile file's text. `file` is used in messages only.
/// Refusal: place "FILE:line:column", reason with what would be right; the first problem only.
[[nodiscard]] base::Outcome<instrument::Profile> read_profile(std::string_view text, const std::string& file);

/// Names of the built-in profiles, in alphabetical order: "scpi-load", "scpi-meter", ...
[[nodiscard]] std::vector<std::string_view> built_in_profile_names();

/// A profile by the name that a hook-up file gives it: a built-in one, or, when it ends in ".json", a file
/// beside the hook-up file. Refusal: without a place when there is no such profile or file (the place is the
/// hook-up's to say); with the profile file's own place when the file is wrong.
[[nodiscard]] base::Outcome<instrument::Profile> find_profile(const std::string& name,
                                                              const std::string& hookup_file);

/// Whether anything is ever said or heard: false for a scope that only drops files.
[[nodiscard]] bool has_conversation(const instrument::Profile& profile);

}  // namespace loadstair::setup
