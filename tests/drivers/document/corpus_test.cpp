#include <algorithm>
#include <catch2/catch.hpp>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <random>
#include <string>
#include <vector>

#include "analysis/base/number.h"
#include "fuzz/document_oracle.h"

namespace loadstair {
namespace {

std::vector<std::string> corpus() {
  std::vector<std::filesystem::path> paths;
  for (const auto& entry :
       std::filesystem::directory_iterator{LOADSTAIR_SOURCE "/tests/fuzz/corpus/document"}) {
    paths.push_back(entry.path());
  }
  std::sort(paths.begin(), paths.end());
  std::vector<std::string> texts;
  for (const auto& path : paths) {
    std::ifstream file{path, std::ios::binary};
    texts.emplace_back(std::istreambuf_iterator<char>{file}, std::istreambuf_iterator<char>{});
  }
  return texts;
}

TEST_CASE("the fuzzer's corpus holds its promises when replayed") {
  const auto texts = corpus();
  REQUIRE(texts.size() >= 10);
  for (const auto& text : texts) {
    INFO(text);
    CHECK(fuzz::check_document(text) == "");
  }
}

TEST_CASE("so does each text of the corpus cut at every byte, and with bytes changed at random") {
  const char* given = std::getenv("LOADSTAIR_SEED");
  const auto seed = static_cast<unsigned>(given == nullptr ? 1 : base::parse_integer(given).value_or(1));
  INFO("LOADSTAIR_SEED=" << seed);
  std::mt19937 random{seed};
  for (const auto& text : corpus()) {
    for (std::size_t cut = 0; cut < std::min<std::size_t>(text.size(), 600); ++cut) {
      const std::string broken = fuzz::check_document(std::string_view{text}.substr(0, cut));
      if (!broken.empty()) FAIL(broken << "\n" << text.substr(0, cut));
    }
    for (int round = 0; round < 200 && !text.empty(); ++round) {
      std::string changed = text;
      for (int i = 0; i < 3; ++i) changed[random() % changed.size()] = static_cast<char>(random() & 0xFFU);
      const std::string broken = fuzz::check_document(changed);
      if (!broken.empty()) FAIL(broken << "\n" << changed);
    }
  }
}

}  // namespace
}  // namespace loadstair
