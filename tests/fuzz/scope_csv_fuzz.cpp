// libFuzzer target; tests/fuzz/corpus/scope_csv is its corpus, replayed by
// tests/drivers/scope_csv/csv_corpus_test.cpp.
#include <cstdint>
#include <cstdio>
#include <cstdlib>
#include <string_view>

#include "tests/fuzz/scope_csv_oracle.h"

extern "C" int LLVMFuzzerTestOneInput(const std::uint8_t* data, std::size_t size) {
  const std::string_view bytes{reinterpret_cast<const char*>(data), size};
  const auto broken = loadstair::fuzz::broken_by_scope_csv(bytes);
  if (broken.empty()) return 0;
  std::fprintf(stderr, "%s\n", broken.c_str());
  std::abort();
}
