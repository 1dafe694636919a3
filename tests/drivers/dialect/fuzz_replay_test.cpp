#include <catch2/catch.hpp>
#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <random>
#include <string>

#include "analysis/base/number.h"
#include "tests/fuzz/scpi_reply_oracle.h"
#include "tests/fuzz/text_line_oracle.h"

namespace {

using namespace loadstair;

using Oracle = std::string (*)(std::string_view);

std::size_t replay(const std::string& corpus, Oracle oracle) {
  std::size_t count = 0;
  for (const auto& file :
       std::filesystem::directory_iterator{LOADSTAIR_SOURCE "/tests/fuzz/corpus/" + corpus}) {
    std::ifstream in{file.path(), std::ios::binary};
    const std::string bytes{std::istreambuf_iterator<char>{in}, {}};
    INFO(file.path());
    CHECK(oracle(bytes).empty());
    ++count;
  }
  return count;
}

std::uint64_t seed_of_run() {
  const char* text = std::getenv("LOADSTAIR_SEED");
  const auto given = text != nullptr ? base::parse_integer(text) : std::nullopt;
  return given ? static_cast<std::uint64_t>(*given) : std::random_device{}();
}

/// Draws from pieces that parsers stumble over, and sometimes any byte.
std::string random_text(std::mt19937_64& engine, const std::vector<std::string>& pieces) {
  std::string text;
  for (auto count = engine() % 12; count > 0; --count) {
    if (engine() % 8 == 0) {
      text += static_cast<char>(engine() % 256);
    } else {
      text += pieces[engine() % pieces.size()];
    }
  }
  return text;
}

void try_random(Oracle oracle, const std::vector<std::string>& pieces) {
  const auto seed = seed_of_run();
  std::mt19937_64 engine{seed};
  for (int i = 0; i < 20'000; ++i) {
    const auto text = random_text(engine, pieces);
    const auto broken = oracle(text);
    if (!broken.empty()) {
      INFO("LOADSTAIR_SEED=" << seed << " text: " << text);
      FAIL(broken);
    }
  }
  std::printf("seed %llu\n", static_cast<unsigned long long>(seed));
}

}  // namespace

TEST_CASE("the fuzz corpus of the dialect room replays without a finding") {
  CHECK(replay("scpi_reply", fuzz::broken_by_scpi_reply) >= 10);
  CHECK(replay("text_line", fuzz::broken_by_text_line) >= 8);
}

TEST_CASE("random SCPI replies keep the promises of the parser") {
  try_random(
      fuzz::broken_by_scpi_reply,
      {"1",      "0",  "3.85", "E+02", "e",  "+", "-", ".",  ",", ";",  "\"",    "'",      "9.91E37",
       "9.9E37", "OL", "----", " ",    "mV", "V", "k", "#H", "#", "FF", "1e999", "1e-320", "\xc2\xb0"});
}

TEST_CASE("random patterns and lines keep the promises of the parser") {
  try_random(fuzz::broken_by_text_line, {"{value}",
                                         "{unit}",
                                         "{prefix}",
                                         "{text}",
                                         "{rest}",
                                         "{{",
                                         "{",
                                         "}",
                                         " ",
                                         "\n",
                                         "T1",
                                         "12.5",
                                         "-",
                                         "OL",
                                         "0L",
                                         "C",
                                         "mV",
                                         "m",
                                         "\xc2\xb0"
                                         "C",
                                         "E5",
                                         "\t",
                                         "F"});
}
