// Digests and compression of what the record keeps. Of this room only.
#pragma once

#include <array>
#include <cstddef>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

namespace loadstair::store {

using Digest = std::array<unsigned char, 32>;

inline constexpr std::size_t kChunkBytes = 1'000'000;  ///< R6

/// SHA-256 of bytes that come in parts.
class Hasher {
 public:
  Hasher();
  void add(std::string_view bytes);
  [[nodiscard]] Digest finish();

 private:
  alignas(16) std::array<unsigned char, 128> state_{};
};

[[nodiscard]] Digest sha256(std::string_view bytes);
[[nodiscard]] std::string hexadecimal(const Digest& digest);

/// One zstd frame of its own.
[[nodiscard]] std::vector<unsigned char> compress(std::string_view bytes);
/// Appends the frame's content to `into`; false when the frame is damaged or would be more than `most` bytes.
[[nodiscard]] bool decompress(std::string_view frame, std::size_t most, std::string& into);

}  // namespace loadstair::store
