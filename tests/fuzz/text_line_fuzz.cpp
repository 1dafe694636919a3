// libFuzzer target; tests/fuzz/corpus/text_line is its corpus, replayed by
// tests/drivers/dialect/fuzz_replay_test.cpp.
#include <cstdint>
#include <cstdlib>
#include <string_view>

#include "tests/fuzz/text_line_oracle.h"

extern "C" int LLVMFuzzerTestOneInput(const std::uint8_t* data, std::size_t size) {
  const std::string_view bytes{reinterpret_cast<const char*>(data), size};
  if (!loadstair::fuzz::broken_by_text_line(bytes).empty()) std::abort();
  return 0;
}
