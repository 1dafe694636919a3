// Replays the fuzzer's corpus, so that the ordinary test run keeps its promises too.
#include <catch2/catch.hpp>
#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <random>
#include <string>
#include <vector>

#include "analysis/base/number.h"
#include "tests/fuzz/scope_csv_oracle.h"

using namespace loadstair;

namespace {

struct Entry {
  std::string name;
  std::string bytes;
};

std::vector<Entry> corpus() {
  std::vector<Entry> entries;
  for (const auto& file :
       std::filesystem::directory_iterator{LOADSTAIR_SOURCE "/tests/fuzz/corpus/scope_csv"}) {
    std::ifstream in{file.path(), std::ios::binary};
    entries.push_back({file.path().filename().string(), {std::istreambuf_iterator<char>{in}, {}}});
  }
  return entries;
}

}  // namespace

TEST_CASE("the fuzzer's corpus of scope files holds its promises when replayed") {
  const auto entries = corpus();
  REQUIRE(entries.size() >= 30);
  for (const auto& entry : entries) {
    INFO(entry.name);
    CHECK(fuzz::broken_by_scope_csv(entry.bytes) == "");
  }
}

TEST_CASE("so do its files with bytes changed at random") {
  const char* given = std::getenv("LOADSTAIR_TEST_SEED");
  const auto seed = base::parse_integer(given != nullptr ? given : "7").value();
  std::mt19937_64 draw{static_cast<std::uint64_t>(seed)};
  constexpr std::string_view kBytes = "0123456789.,;\t\n\r\"-+eE \xb5xn";
  for (const auto& entry : corpus()) {
    if (entry.bytes.empty()) continue;
    for (int round = 0; round < 20; ++round) {
      std::string bytes = entry.bytes;
      for (auto changes = draw() % 4 + 1; changes > 0; --changes) {
        bytes[draw() % bytes.size()] = kBytes[draw() % kBytes.size()];
      }
      INFO("LOADSTAIR_TEST_SEED=" << seed << ", " << entry.name << ", round " << round << ":\n" << bytes);
      REQUIRE(fuzz::broken_by_scope_csv(bytes) == "");
    }
  }
}
