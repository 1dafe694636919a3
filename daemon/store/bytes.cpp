#include "daemon/store/bytes.h"

#include <sodium.h>
#include <zstd.h>

#include <new>

#include "analysis/base/require.h"

namespace loadstair::store {
namespace {

static_assert(sizeof(crypto_hash_sha256_state) <= 128);
static_assert(crypto_hash_sha256_BYTES == 32);

constexpr int kCompressionLevel = 3;

const unsigned char* unsigned_bytes(std::string_view bytes) {
  return reinterpret_cast<const unsigned char*>(bytes.data());
}

}  // namespace

Hasher::Hasher() {
  crypto_hash_sha256_init(new (state_.data()) crypto_hash_sha256_state);
}

void Hasher::add(std::string_view bytes) {
  crypto_hash_sha256_update(std::launder(reinterpret_cast<crypto_hash_sha256_state*>(state_.data())),
                            unsigned_bytes(bytes), bytes.size());
}

Digest Hasher::finish() {
  Digest digest{};
  crypto_hash_sha256_final(std::launder(reinterpret_cast<crypto_hash_sha256_state*>(state_.data())),
                           digest.data());
  return digest;
}

Digest sha256(std::string_view bytes) {
  Hasher hasher;
  hasher.add(bytes);
  return hasher.finish();
}

std::string hexadecimal(const Digest& digest) {
  constexpr std::string_view kDigits = "0123456789abcdef";
  std::string text;
  for (const unsigned char byte : digest) {
    text += kDigits[byte >> 4U];
    text += kDigits[byte & 15U];
  }
  return text;
}

std::vector<unsigned char> compress(std::string_view bytes) {
  std::vector<unsigned char> frame(ZSTD_compressBound(bytes.size()));
  const std::size_t size =
      ZSTD_compress(frame.data(), frame.size(), bytes.data(), bytes.size(), kCompressionLevel);
  base::require(ZSTD_isError(size) == 0, "zstd compresses into a buffer of its own bound");
  frame.resize(size);
  return frame;
}

bool decompress(std::string_view frame, std::size_t most, std::string& into) {
  const unsigned long long size = ZSTD_getFrameContentSize(frame.data(), frame.size());
  if (size == ZSTD_CONTENTSIZE_UNKNOWN || size == ZSTD_CONTENTSIZE_ERROR || size > most) return false;
  const std::size_t before = into.size();
  into.resize(before + static_cast<std::size_t>(size));
  const std::size_t got =
      ZSTD_decompress(into.data() + before, static_cast<std::size_t>(size), frame.data(), frame.size());
  return ZSTD_isError(got) == 0 && got == size;
}

}  // namespace loadstair::store
