// A second opinion on samples from python3-numpy: tests write samples to a file and let numpy compute.
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

namespace loadstair::test {

/// Runs a script with numpy as np and the arrays as x[0], x[1], ...; the script calls out(value) for each
/// result. Returns the results in order. Fails the test when python3-numpy is missing or the script ends with
/// an error.
inline std::vector<double> numpy(const std::string& script,
                                 std::initializer_list<std::span<const double>> arrays) {
  const std::filesystem::path folder =
      std::filesystem::temp_directory_path() / ("loadstair-numpy-" + std::to_string(::getpid()));
  std::filesystem::create_directories(folder);
  std::ofstream code{folder / "script.py"};
  code << "import numpy as np\nx = []\n";
  int index = 0;
  for (const auto array : arrays) {
    const std::filesystem::path file = folder / ("x" + std::to_string(index++));
    std::ofstream data{file, std::ios::binary};
    data.write(reinterpret_cast<const char*>(array.data()), static_cast<std::streamsize>(array.size_bytes()));
    code << "x.append(np.fromfile('" << file.string() << "'))\n";
  }
  code << "def out(value):\n    print(repr(float(value)))\n" << script;
  code.close();
  std::FILE* pipe = ::popen(("/usr/bin/python3 " + (folder / "script.py").string()).c_str(), "r");
  REQUIRE(pipe != nullptr);
  std::vector<double> results;
  std::string line;
  for (int c = std::fgetc(pipe); c != EOF; c = std::fgetc(pipe)) {
    if (c != '\n') {
      line += static_cast<char>(c);
      continue;
    }
    const auto value = base::parse_number(line);
    INFO("numpy printed " << line);
    REQUIRE(value);
    results.push_back(*value);
    line.clear();
  }
  REQUIRE(::pclose(pipe) == 0);
  std::filesystem::remove_all(folder);
  return results;
}

}  // namespace loadstair::test
