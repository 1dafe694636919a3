// A second opinion from R (r-base-core): tests write numbers to files and let R compute.
#pragma once

#include <unistd.h>

#include <catch2/catch.hpp>
#include <cstdio>
#include <filesystem>
#include <fstream>
#include <span>
#include <string>
#include <vector>

#include "analysis/base/number.h"

namespace loadstair::tests {

/// Runs a script with the arrays as x[[1]], x[[2]], ...; the script calls out(values) for its results.
/// Returns them in order. Fails the test when Rscript is missing or the script ends with an error: nothing is
/// skipped.
inline std::vector<double> rscript(const std::string& script,
                                   const std::vector<std::vector<double>>& arrays) {
  const std::filesystem::path folder =
      std::filesystem::temp_directory_path() / ("loadstair-r-" + std::to_string(::getpid()));
  std::filesystem::create_directories(folder);
  std::ofstream code{folder / "script.R"};
  code << "options(warn = 1)\nx <- list()\n";
  std::size_t index = 0;
  for (const std::vector<double>& array : arrays) {
    const std::filesystem::path file = folder / ("x" + std::to_string(index++));
    std::ofstream data{file, std::ios::binary};
    data.write(reinterpret_cast<const char*>(array.data()),
               static_cast<std::streamsize>(array.size() * sizeof(double)));
    code << "x[[" << index << "]] <- readBin('" << file.string() << "', 'double', " << array.size() << ")\n";
  }
  code << "out <- function(values) cat(sprintf('%.17g\\n', values), sep = '')\n" << script;
  code.close();
  std::FILE* pipe = ::popen(("/usr/bin/Rscript --vanilla " + (folder / "script.R").string()).c_str(), "r");
  REQUIRE(pipe != nullptr);
  std::string text;
  for (int c = std::fgetc(pipe); c != EOF; c = std::fgetc(pipe)) text += static_cast<char>(c);
  const int status = ::pclose(pipe);
  INFO("needs Rscript (apt: r-base-core; .ci/setup tests installs it); R printed: " << text.substr(0, 400));
  REQUIRE(status == 0);
  std::filesystem::remove_all(folder);
  std::vector<double> results;
  std::size_t from = 0;
  while (from < text.size()) {
    const std::size_t end = text.find('\n', from);
    const auto value = base::parse_number(text.substr(from, end - from));
    INFO("R printed " << text.substr(from, end - from));
    REQUIRE(value);
    results.push_back(*value);
    from = end + 1;
  }
  return results;
}

}  // namespace loadstair::tests
