// Random expression trees with shared sources, against python3-uncertainties (E. O. Lebigot), an independent
// implementation of linear propagation by automatic differentiation.
#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <cstdio>
#include <filesystem>
#include <fstream>
#include <sstream>
#include <string>
#include <vector>

#include "analysis/base/number.h"
#include "analysis/estimate/estimate.h"
#include "tests/analysis/random_source.h"

using namespace loadstair;
using estimate::Estimate;

namespace {

constexpr std::size_t kSources = 6;
constexpr std::size_t kVariables = 8;
constexpr std::size_t kTrees = 240;

struct Expression {
  std::string text;  ///< as Python reads it
  Estimate found;
};

/// x0..x7, each of two or three of the sources s0..s5.
std::vector<Expression> variables(tests::RandomSource& random, std::string& script) {
  std::vector<Expression> out;
  for (std::size_t i = 0; i < kVariables; ++i) {
    const std::string name = "x" + std::to_string(i);
    Expression variable{name, Estimate{random.uniform(0.5, 20)}};
    script += name + " = " + base::print_number(variable.found.value());
    for (std::size_t k = 0; k < 2 + random.below(2); ++k) {
      const std::string source = "s" + std::to_string(random.below(kSources));
      const double u = variable.found.value() * random.uniform(-0.02, 0.02);
      variable.found = variable.found +
                       Estimate{0, estimate::make_type_b(source, source, estimate::Distribution::normal), u};
      script += " + " + base::print_number(u) + " * " + source;
    }
    script += "\n";
    out.push_back(variable);
  }
  return out;
}

Expression tree(tests::RandomSource& random, const std::vector<Expression>& leaves, int depth) {
  if (depth == 0 || random.below(6) == 0) return leaves[random.below(leaves.size())];
  const Expression a = tree(random, leaves, depth - 1);
  switch (random.below(7)) {
    case 0:
      if (a.found.value() > 0.01) return {"sqrt(" + a.text + ")", estimate::square_root(a.found)};
      return {"(-" + a.text + ")", -a.found};
    case 1: {
      const double c = random.uniform(0.5, 3);
      return {"(" + base::print_number(c) + " - " + a.text + ")", c - a.found};
    }
    default:
      break;
  }
  const Expression b = tree(random, leaves, depth - 1);
  switch (random.below(4)) {
    case 0:
      return {"(" + a.text + " + " + b.text + ")", a.found + b.found};
    case 1:
      return {"(" + a.text + " - " + b.text + ")", a.found - b.found};
    case 2:
      if (std::abs(b.found.value()) > 0.01) return {"(" + a.text + " / " + b.text + ")", a.found / b.found};
      [[fallthrough]];
    default:
      return {"(" + a.text + " * " + b.text + ")", a.found * b.found};
  }
}

/// Runs the script; its output, line by line.
std::vector<std::string> run_python(const std::string& script, std::uint64_t seed) {
  const auto path = std::filesystem::temp_directory_path() /
                    ("loadstair_expression_trees_" + std::to_string(seed) + "_" +
                     std::to_string(reinterpret_cast<std::uintptr_t>(&script)) + ".py");
  std::ofstream{path} << script;
  std::string output;
  FILE* pipe = popen(("/usr/bin/python3 " + path.string()).c_str(), "r");
  REQUIRE(pipe != nullptr);
  char buffer[4096];
  while (std::fgets(buffer, sizeof buffer, pipe) != nullptr) output += buffer;
  const int status = pclose(pipe);
  std::filesystem::remove(path);
  INFO("needs python3-uncertainties (apt); .ci/setup tests installs it");
  REQUIRE(status == 0);
  std::vector<std::string> lines;
  std::istringstream stream{output};
  for (std::string line; std::getline(stream, line);) lines.push_back(line);
  return lines;
}

}  // namespace

TEST_CASE("random expression trees agree with python3-uncertainties in value, deviation and covariance") {
  const auto seed = tests::seed_of_tests();
  INFO("LOADSTAIR_SEED=" << seed);
  tests::RandomSource random{seed};
  std::string script =
      "from uncertainties import ufloat, covariance_matrix\nfrom uncertainties.umath import sqrt\n";
  for (std::size_t i = 0; i < kSources; ++i) script += "s" + std::to_string(i) + " = ufloat(0, 1)\n";
  const auto leaves = variables(random, script);
  script += "t = []\n";
  std::vector<Expression> trees;
  while (trees.size() < kTrees) {
    Expression one = tree(random, leaves, 5);
    // Trees of constants, and numbers that leave the range of a bench, show nothing.
    if (one.found.terms().empty() || !(std::abs(one.found.value()) < 1e9)) continue;
    script += "t.append(" + one.text + ")\n";
    trees.push_back(std::move(one));
  }
  // Every value with its deviation, then the covariances of all pairs, row by row.
  script +=
      "for a in t: print(repr(a.nominal_value), repr(a.std_dev))\n"
      "for row in covariance_matrix(t): print(*[repr(float(c)) for c in row])\n";
  const auto lines = run_python(script, seed);
  REQUIRE(lines.size() == 2 * kTrees);
  const auto next_number = [](std::istringstream& fields) {
    std::string text;
    fields >> text;
    const auto number = base::parse_number(text);
    REQUIRE(number);
    return *number;
  };
  for (std::size_t i = 0; i < kTrees; ++i) {
    const Estimate& mine = trees[i].found;
    INFO(trees[i].text);
    std::istringstream fields{lines[i]};
    CHECK(mine.value() == Approx(next_number(fields)).epsilon(1e-12));
    CHECK(mine.standard_uncertainty() == Approx(next_number(fields)).epsilon(1e-9));
    std::istringstream row{lines[kTrees + i]};
    double worst = 0;
    for (const Expression& other : trees) {
      const double scale = mine.standard_uncertainty() * other.found.standard_uncertainty();
      worst = std::max(worst, std::abs(estimate::covariance(mine, other.found) - next_number(row)) / scale);
    }
    CHECK(worst <= 1e-9);
  }
}
