// UTF-8 as the documents need it: is it valid, and how is one character written.
#pragma once

#include <cstddef>
#include <cstdint>
#include <optional>
#include <string>
#include <string_view>

namespace loadstair::document {

/// Bytes of the character that begins at `at`: 1 to 4; 0 when the bytes there are no valid UTF-8 (overlong
/// forms, surrogates and values beyond U+10FFFF are not; The Unicode Standard 15.0, table 3-7). Precondition:
/// at < text.size().
[[nodiscard]] std::size_t character_size(std::string_view text, std::size_t at);

/// Appends the character. Precondition: a scalar value (no surrogate, at most 0x10FFFF).
void append_character(std::string& text, std::uint32_t code);

}  // namespace loadstair::document
